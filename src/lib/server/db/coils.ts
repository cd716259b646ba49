import { randomInt } from 'node:crypto';
import { sql, type Selectable, type Transaction } from 'kysely';
import type { CoilPlan, Direction, TopFaces } from '../../winding/types.ts';
import { isUuid } from './ids.ts';
import type { CoilTable, Database } from './schema.ts';

/** What to wind, as the short form asks for it. */
export interface CoilInput {
	name: string;
	note: string;
	target: number;
	lookEvery: number;
	direction: Direction;
	topFaces: TopFaces;
	toleranceTurns: number;
}

/** The coil of a spec's revision that a coil or a run comes from. */
export interface SpecRef {
	id: string;
	/** Of the revision. */
	no: number;
	/** Index of the coil in it. */
	coil: number;
}

/** What a coil has from its spec, and its run from it; all null for one that was put in the queue by hand. */
export interface FromSpec {
	spec: SpecRef | null;
	spoolId: string | null;
	/** Turns of one early look, 0 for none; null: the usual one on the first coil of a session. */
	firstLook: number | null;
	/** Turns at which the wire reaches the flange; null: unknown. */
	fullTurns: number | null;
}

/** A coil of the queue: waiting, or on a bench. */
export interface Coil extends CoilInput, FromSpec {
	id: string;
	place: number;
	state: 'waiting' | 'on-bench' | 'wound' | 'removed';
	winderId: string | null;
	againOfRun: string | null;
	createdAt: Date;
}

/** The ranges of the table, for forms. A coil of more than 100,000 turns is a slip of the finger. */
export const coilLimits = {
	nameMax: 80,
	noteMax: 500,
	target: { min: 1, max: 100_000 },
	lookEvery: { min: 0, max: 100_000 },
	toleranceTurns: { min: 0, max: 1000 },
	/** Coils put in the queue at once: more than a bench winds in weeks. */
	addAtOnceMax: 50
} as const;

/** A coil the bench took: the run row is written with it. */
export interface TakenCoil {
	runId: string;
	plan: CoilPlan;
	sticker: string;
}

type Trx = Transaction<Database>;

/** What waits, in order. */
export async function listWaiting(trx: Trx, workshopId: string): Promise<Coil[]> {
	const rows = await trx
		.selectFrom('coil')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('state', '=', 'waiting')
		.orderBy('place')
		.orderBy('id')
		.execute();
	return rows.map(toCoil);
}

/** How many coils wait, for the strip across every page. */
export async function countWaiting(trx: Trx, workshopId: string): Promise<number> {
	const { n } = await trx
		.selectFrom('coil')
		.select((eb) => eb.fn.countAll<number>().as('n'))
		.where('workshop_id', '=', workshopId)
		.where('state', '=', 'waiting')
		.executeTakeFirstOrThrow();
	return n;
}

/** Coils the benches hold, with the winder of each. */
export async function listOnBench(trx: Trx, workshopId: string): Promise<Coil[]> {
	const rows = await trx
		.selectFrom('coil')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('state', '=', 'on-bench')
		.orderBy('place')
		.execute();
	return rows.map(toCoil);
}

export async function findCoil(trx: Trx, workshopId: string, coilId: string): Promise<Coil | null> {
	if (!isUuid(coilId)) return null;
	const row = await trx
		.selectFrom('coil')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('id', '=', coilId)
		.executeTakeFirst();
	return row ? toCoil(row) : null;
}

/** At the end of the queue. Afterwards tell `ingest.queueChanged`. Spec and spool are this workshop's own. */
export async function addCoil(
	trx: Trx,
	workshopId: string,
	coil: CoilInput,
	more: { createdBy: string | null; againOfRun?: string | null } & Partial<FromSpec>
): Promise<Coil> {
	const row = await trx
		.insertInto('coil')
		.values((eb) => ({
			workshop_id: workshopId,
			...plannedColumns(coil),
			tolerance_turns: coil.toleranceTurns,
			created_by: more.createdBy,
			again_of_run: more.againOfRun ?? null,
			spec_id: more.spec?.id ?? null,
			spec_revision_no: more.spec?.no ?? null,
			spec_coil: more.spec?.coil ?? null,
			spool_id: more.spoolId ?? null,
			first_look: more.firstLook ?? null,
			full_turns: more.fullTurns ?? null,
			place: eb
				.selectFrom('coil')
				.where('workshop_id', '=', workshopId)
				.select((e) => sql<number>`coalesce(${e.fn.max('place')}, 0) + 1`.as('place'))
		}))
		.returningAll()
		.executeTakeFirstOrThrow();
	return toCoil(row);
}

/**
 * Changes a coil that waits or is on a bench; what is wound stays as it was, and so do its tolerance and what it has from a
 * spec. Afterwards tell `ingest.planChanged` when the answer is `on-bench`, and `ingest.queueChanged` otherwise.
 */
export async function editCoil(
	trx: Trx,
	workshopId: string,
	coilId: string,
	coil: Omit<CoilInput, 'toleranceTurns'>
): Promise<'waiting' | 'on-bench' | 'not-found'> {
	if (!isUuid(coilId)) return 'not-found';
	const row = await trx
		.updateTable('coil')
		.set(plannedColumns(coil))
		.where('workshop_id', '=', workshopId)
		.where('id', '=', coilId)
		.where('state', 'in', ['waiting', 'on-bench'])
		.returning('state')
		.executeTakeFirst();
	return row ? (row.state as 'waiting' | 'on-bench') : 'not-found';
}

/** Puts a waiting coil before another waiting one, or at the end (null). */
export async function moveCoil(
	trx: Trx,
	workshopId: string,
	coilId: string,
	beforeCoilId: string | null
): Promise<'ok' | 'not-found'> {
	if (coilId === beforeCoilId) return 'ok';
	// The whole queue is locked and numbered anew: a few dozen rows, and no gap can run out.
	const rows = await trx
		.selectFrom('coil')
		.select(['id', 'place'])
		.where('workshop_id', '=', workshopId)
		.where('state', '=', 'waiting')
		.orderBy('place')
		.orderBy('id')
		.forUpdate()
		.execute();
	const order = rows.map((row) => row.id);
	if (!order.includes(coilId)) return 'not-found';
	const rest = order.filter((id) => id !== coilId);
	const at = beforeCoilId === null ? rest.length : rest.indexOf(beforeCoilId);
	if (at < 0) return 'not-found';
	rest.splice(at, 0, coilId);
	await sql`
		update coil set place = given.place
		from unnest(${rest}::uuid[]) with ordinality as given (id, place)
		where coil.workshop_id = ${workshopId} and coil.id = given.id`.execute(trx);
	return 'ok';
}

/** Takes a waiting coil out of the queue. `on-bench`: put it back first. */
export async function removeCoil(
	trx: Trx,
	workshopId: string,
	coilId: string
): Promise<'ok' | 'on-bench' | 'not-found'> {
	if (!isUuid(coilId)) return 'not-found';
	const row = await trx
		.updateTable('coil')
		.set({ state: 'removed' })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', coilId)
		.where('state', '=', 'waiting')
		.returning('id')
		.executeTakeFirst();
	if (row) return 'ok';
	const found = await findCoil(trx, workshopId, coilId);
	return found?.state === 'on-bench' ? 'on-bench' : 'not-found';
}

/** The coil at the head of the queue and how many wait. */
export async function headOfQueue(
	trx: Trx,
	workshopId: string
): Promise<{ next: { name: string; target: number } | null; waiting: number }> {
	const rows = await trx
		.selectFrom('coil')
		.select((eb) => ['name', 'target', eb.fn.countAll<number>().over().as('waiting')])
		.where('workshop_id', '=', workshopId)
		.where('state', '=', 'waiting')
		.orderBy('place')
		.orderBy('id')
		.limit(1)
		.execute();
	const head = rows[0];
	return head
		? { next: { name: head.name, target: head.target }, waiting: Number(head.waiting) }
		: { next: null, waiting: 0 };
}

/**
 * The next coil of the queue goes to a bench, with its run. Two benches that ask at once get two coils: the row is
 * locked and a locked one is passed over. `reserved`: coils left to other benches. null: nothing waits.
 */
export async function takeNextCoil(
	trx: Trx,
	workshopId: string,
	winderId: string,
	takenAt: Date,
	reserved: string[] = []
): Promise<TakenCoil | null> {
	const row = await trx
		.selectFrom('coil')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('state', '=', 'waiting')
		.where(sql<boolean>`id <> all(${reserved}::uuid[])`)
		.orderBy('place')
		.orderBy('id')
		.limit(1)
		.forUpdate()
		.skipLocked()
		.executeTakeFirst();
	if (!row) return null;
	await trx
		.updateTable('coil')
		.set({ state: 'on-bench', winder_id: winderId })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', row.id)
		.execute();
	const sticker = await freeSticker(trx, workshopId);
	const run = await trx
		.insertInto('run')
		.values({
			workshop_id: workshopId,
			coil_id: row.id,
			winder_id: winderId,
			coil_name: row.name,
			target: row.target,
			look_every: row.look_every,
			direction: row.direction,
			top_faces: row.top_faces,
			tolerance_turns: row.tolerance_turns,
			taken_at: takenAt,
			sticker,
			spec_id: row.spec_id,
			spec_revision_no: row.spec_revision_no,
			spec_coil: row.spec_coil,
			spool_id: row.spool_id,
			first_look: row.first_look,
			full_turns: row.full_turns
		})
		.returning('id')
		.executeTakeFirstOrThrow();
	return { runId: run.id, plan: toPlan(toCoil(row)), sticker };
}

/** What was to be wound is still to be wound: first in the queue again. Nothing, when it is no more at that winder. */
export async function backToHead(trx: Trx, workshopId: string, winderId: string, coilId: string): Promise<void> {
	await trx
		.updateTable('coil')
		.set((eb) => ({
			state: 'waiting' as const,
			winder_id: null,
			place: eb
				.selectFrom('coil')
				.where('workshop_id', '=', workshopId)
				.where('state', '=', 'waiting')
				.select((e) => sql<number>`coalesce(${e.fn.min('place')}, 1) - 1`.as('place'))
		}))
		.where('workshop_id', '=', workshopId)
		.where('id', '=', coilId)
		.where('state', '=', 'on-bench')
		.where('winder_id', '=', winderId)
		.execute();
}

/** The plan the bench works to. */
export function toPlan(coil: Coil): CoilPlan {
	return {
		coilId: coil.id,
		name: coil.name,
		note: coil.note,
		target: coil.target,
		lookEvery: coil.lookEvery,
		direction: coil.direction,
		topFaces: coil.topFaces,
		toleranceTurns: coil.toleranceTurns,
		firstLook: coil.firstLook,
		fullTurns: coil.fullTurns
	};
}

/** Written by hand on a sticker and read by eye: no 0 and O, no 1, I and L, no U (read as V). */
const stickerLetters = '23456789ABCDEFGHJKMNPQRSTVWXYZ';
/** 30^4 = 810,000 codes; a workshop that winds fifty coils a day has them for forty years. */
const stickerLength = 4;

async function freeSticker(trx: Trx, workshopId: string): Promise<string> {
	for (let length = stickerLength; ; length++) {
		const codes = Array.from({ length: 8 }, () =>
			Array.from({ length }, () => stickerLetters[randomInt(stickerLetters.length)]).join('')
		);
		const taken = await trx
			.selectFrom('run')
			.select('sticker')
			.where('workshop_id', '=', workshopId)
			.where('sticker', 'in', codes)
			.execute();
		const used = new Set(taken.map((row) => row.sticker));
		const free = codes.find((code) => !used.has(code));
		if (free) return free;
	}
}

function plannedColumns(coil: Omit<CoilInput, 'toleranceTurns'>) {
	return {
		name: coil.name,
		note: coil.note,
		target: coil.target,
		look_every: coil.lookEvery,
		direction: coil.direction,
		top_faces: coil.topFaces
	};
}

function toCoil(row: Selectable<CoilTable>): Coil {
	return {
		id: row.id,
		name: row.name,
		note: row.note,
		target: row.target,
		lookEvery: row.look_every,
		direction: row.direction,
		topFaces: row.top_faces,
		toleranceTurns: row.tolerance_turns,
		place: row.place,
		state: row.state,
		winderId: row.winder_id,
		againOfRun: row.again_of_run,
		createdAt: row.created_at,
		...fromSpec(row)
	};
}

/** Of a row of `coil` or `run`. */
export function fromSpec(
	row: Pick<
		Selectable<CoilTable>,
		'spec_id' | 'spec_revision_no' | 'spec_coil' | 'spool_id' | 'first_look' | 'full_turns'
	>
): FromSpec {
	const { spec_id: id, spec_revision_no: no, spec_coil: coil } = row;
	return {
		spec: id === null || no === null || coil === null ? null : { id, no, coil },
		spoolId: row.spool_id,
		firstLook: row.first_look,
		fullTurns: row.full_turns
	};
}
