import { sql, type Transaction } from 'kysely';
import { specWire, type SpecWire } from '../../spec/content.ts';
import { isUuid } from './ids.ts';
import type { Database } from './schema.ts';

type Trx = Transaction<Database>;

/** One bought reel. */
export interface SpoolInput {
	name: string;
	/** The wire maker's lot, as it stands on the reel. */
	lot: string;
	wire: SpecWire;
	note: string;
}

export interface Spool extends SpoolInput {
	id: string;
	createdAt: Date;
	/** Empty or given away; null: on the shelf. */
	endedAt: Date | null;
	/** Kept runs wound from it. */
	coils: number;
}

/** The ranges of the table, in characters, for forms. */
export const spoolLimits = { nameMax: 80, lotMax: 80, noteMax: 2000 } as const;

/** Spools on the shelf by name; `ended`: those that are no more, the last first. */
export async function listSpools(
	trx: Trx,
	workshopId: string,
	{ ended = false }: { ended?: boolean } = {}
): Promise<Spool[]> {
	const query = spools(trx, workshopId);
	const rows = ended
		? await query
				.where('spool.ended_at', 'is not', null)
				.orderBy('spool.ended_at', 'desc')
				.orderBy('spool.id')
				.execute()
		: await query
				.where('spool.ended_at', 'is', null)
				.orderBy(sql`lower(spool.name)`)
				.orderBy('spool.id')
				.execute();
	return rows.map(toSpool);
}

/** On the shelf or ended. null: unknown or another workshop's. */
export async function findSpool(trx: Trx, workshopId: string, spoolId: string): Promise<Spool | null> {
	if (!isUuid(spoolId)) return null;
	const row = await spools(trx, workshopId).where('spool.id', '=', spoolId).executeTakeFirst();
	return row ? toSpool(row) : null;
}

/** `name-taken`: a spool on the shelf has that name, whatever its case. */
export async function addSpool(
	trx: Trx,
	workshopId: string,
	spool: SpoolInput,
	by: string | null
): Promise<{ ok: true; id: string } | { ok: false; why: 'name-taken' }> {
	await lockNames(trx, workshopId);
	const row = await trx
		.insertInto('spool')
		.values({ workshop_id: workshopId, ...columns(spool), created_by: by })
		.onConflict((conflict) => conflict.doNothing())
		.returning('id')
		.executeTakeFirst();
	return row ? { ok: true, id: row.id } : { ok: false, why: 'name-taken' };
}

/** Coils already wound from it are reckoned anew with what is said now: it is one and the same reel. */
export async function editSpool(
	trx: Trx,
	workshopId: string,
	spoolId: string,
	spool: SpoolInput
): Promise<'ok' | 'not-found' | 'name-taken'> {
	const found = await lockSpool(trx, workshopId, spoolId);
	if (!found) return 'not-found';
	if (!found.ended && (await nameTaken(trx, workshopId, spool.name, spoolId))) return 'name-taken';
	await trx
		.updateTable('spool')
		.set(columns(spool))
		.where('workshop_id', '=', workshopId)
		.where('id', '=', spoolId)
		.execute();
	return 'ok';
}

/** Off the shelf, or back on it unless another has its name by now. What was wound from it keeps it. */
export async function endSpool(
	trx: Trx,
	workshopId: string,
	spoolId: string,
	ended: boolean
): Promise<'ok' | 'not-found' | 'name-taken'> {
	const found = await lockSpool(trx, workshopId, spoolId);
	if (!found) return 'not-found';
	if (found.ended === ended) return 'ok';
	if (!ended && (await nameTaken(trx, workshopId, found.name, spoolId))) return 'name-taken';
	await trx
		.updateTable('spool')
		.set({ ended_at: ended ? sql<Date>`now()` : null })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', spoolId)
		.execute();
	return 'ok';
}

async function lockSpool(
	trx: Trx,
	workshopId: string,
	spoolId: string
): Promise<{ name: string; ended: boolean } | null> {
	if (!isUuid(spoolId)) return null;
	await lockNames(trx, workshopId);
	const row = await trx
		.selectFrom('spool')
		.select(['name', 'ended_at'])
		.where('workshop_id', '=', workshopId)
		.where('id', '=', spoolId)
		.forUpdate()
		.executeTakeFirst();
	return row ? { name: row.name, ended: row.ended_at !== null } : null;
}

/** Of two that take one name at the same moment the second is told so, where the index alone would raise an error. */
async function lockNames(trx: Trx, workshopId: string): Promise<void> {
	await sql`select pg_advisory_xact_lock(hashtextextended(${`spool names ${workshopId}`}, 0))`.execute(trx);
}

async function nameTaken(trx: Trx, workshopId: string, name: string, exceptId: string): Promise<boolean> {
	const row = await trx
		.selectFrom('spool')
		.select('id')
		.where('workshop_id', '=', workshopId)
		.where('ended_at', 'is', null)
		.where('id', '<>', exceptId)
		.where(sql<boolean>`lower(name) = lower(${name})`)
		.executeTakeFirst();
	return row !== undefined;
}

function spools(trx: Trx, workshopId: string) {
	return trx
		.selectFrom('spool')
		.selectAll('spool')
		.select((eb) =>
			eb
				.selectFrom('run')
				.whereRef('run.workshop_id', '=', 'spool.workshop_id')
				.whereRef('run.spool_id', '=', 'spool.id')
				.where('run.state', '=', 'kept')
				.select((e) => e.fn.countAll<number>().as('coils'))
				.as('coils')
		)
		.where('spool.workshop_id', '=', workshopId);
}

type Row = Awaited<ReturnType<ReturnType<typeof spools>['execute']>>[number];

function columns(spool: SpoolInput) {
	return { name: spool.name, lot: spool.lot, wire: JSON.stringify(specWire.parse(spool.wire)), note: spool.note };
}

function toSpool(row: Row): Spool {
	return {
		id: row.id,
		name: row.name,
		lot: row.lot,
		wire: specWire.parse(row.wire),
		note: row.note,
		createdAt: row.created_at,
		endedAt: row.ended_at,
		coils: Number(row.coils ?? 0)
	};
}
