import { sql, type Kysely, type Transaction } from 'kysely';
import type { CoilPlan, Fact, RunFigures } from '../../winding/types.ts';
import type { Cursor as TakenIn, KeptLine } from '../../winding/winder.ts';
import { backToHead } from './coils.ts';
import type { Database } from './schema.ts';

/** A line as it is kept, and when it came (Unix ms). */
export interface LineRow extends KeptLine {
	receivedAt: number;
}

/** What is taken in of a boot; it commits with every batch of its lines. */
export interface Cursor extends TakenIn {
	firstAt: number;
	lastAt: number;
}

export interface NumberedFact extends Fact {
	no: number;
	/** The tap that made it, so that the same tap is known again after a restart. */
	tapId: string | null;
}

/** A stretch of lines of one boot that belongs to a run. Sums are f + v, which only grow within a boot. */
export interface TraceStretch {
	b: string;
	sign: 1 | -1;
	/** f + v, and f − v, at its zero. */
	fromSum: number;
	fromNet: number;
	/** f + v at its end. */
	toSum: number;
	/** Turns of the run at its zero. */
	fromTurns: number;
	/** Device milliseconds of the boot at which the run's clock starts (may be negative) and ends. */
	startT: number;
	endT: number;
}

/** What a step of the fold changes in the rows of a run and its coil. */
export type RunChange =
	| { kind: 'started'; runId: string; at: number }
	| {
			kind: 'closed';
			runId: string;
			coilId: string;
			state: 'kept' | 'set-aside';
			reason: string | null;
			startedAt: number | null;
			endedAt: number;
			endedBy: string | null;
			figures: RunFigures;
			trace: TraceStretch[];
	  }
	| { kind: 'trace'; runId: string; trace: TraceStretch[] }
	| { kind: 'reopened'; runId: string; coilId: string; winderId: string }
	| { kind: 'put-back'; runId: string; coilId: string }
	/** A run goes on at another winder. */
	| { kind: 'moved'; runId: string; coilId: string; winderId: string };

/** All that is to be written of one winder, in the order it happened. */
export interface WinderWrite {
	workshopId: string;
	winderId: string;
	lines: LineRow[];
	cursors: Cursor[];
	facts: NumberedFact[];
	changes: RunChange[];
	/** The fold's state after all of the above, and the number of the last fact; null: as it was last written. */
	snapshot: { state: object; factNo: number; at: number } | null;
}

/**
 * A fact's number is taken by another fact: two writers number the facts of one winder. Its code is that of a unique
 * violation, which it is.
 */
export class FactNumberTaken extends Error {
	override readonly name = 'FactNumberTaken';
	readonly code = '23505';
}

/** A trace is drawn on a screen or a sheet: more points than this show nothing more. */
export const tracePointsMax = 2_000;
/** Lines swept in one statement, so that a sweep never holds a lock for long. */
const sweepLinesMax = 5_000;

/** States of winders in one statement: each is some kilobytes, and writing out many at once would hold up lines. */
const snapshotsAtOnce = 8;

type Trx = Transaction<Database>;

/**
 * Writes a batch over any number of winders and workshops: all of it or nothing. When it returns, it is on disk.
 *
 * A connection may break after the commit and before its answer, so that nobody knows whether it was written. Writing the
 * same batch again therefore changes nothing: what is there already stays as it is.
 */
export async function writeBatch(db: Kysely<Database>, writes: WinderWrite[]): Promise<void> {
	const byWorkshop = new Map<string, WinderWrite[]>();
	for (const write of writes) {
		const list = byWorkshop.get(write.workshopId);
		if (list) list.push(write);
		else byWorkshop.set(write.workshopId, [write]);
	}
	await db.transaction().execute(async (trx) => {
		// In one order always, so that two batches never wait for each other's rows crosswise.
		for (const workshopId of [...byWorkshop.keys()].sort()) {
			// What is acknowledged must outlive a power cut, whatever the server's own setting.
			await sql`
				select set_config('turnstead.workshop', ${workshopId}, true), set_config('synchronous_commit', 'on', true)
			`.execute(trx);
			await writeWorkshop(trx, workshopId, byWorkshop.get(workshopId) ?? []);
		}
	});
}

async function writeWorkshop(trx: Trx, workshopId: string, writes: WinderWrite[]): Promise<void> {
	await insertLines(trx, workshopId, writes);
	await upsertCursors(trx, workshopId, writes);
	await insertFacts(trx, workshopId, writes);
	for (const write of writes) {
		for (const change of write.changes) await changeRun(trx, workshopId, write.winderId, change);
	}
	await upsertSnapshots(trx, workshopId, writes);
}

async function insertLines(trx: Trx, workshopId: string, writes: WinderWrite[]): Promise<void> {
	const rows = writes.flatMap((write) => write.lines.map((line) => ({ ...line, winderId: write.winderId })));
	if (rows.length === 0) return;
	// unnest: one statement of a dozen arrays inserts thirty times as many rows a second as one statement a row.
	await sql`
		insert into kept_line (workshop_id, winder_id, boot, n, e, k, f, v, r, t, x, g, received_at)
		select ${workshopId}::uuid, row.winder_id, row.boot, row.n, row.e, row.k, row.f, row.v, row.r, row.t, row.x, row.g,
			to_timestamp(row.received_ms / 1000.0)
		from unnest(
			${rows.map((row) => row.winderId)}::uuid[], ${rows.map((row) => row.b)}::text[],
			${rows.map((row) => row.n)}::bigint[], ${rows.map((row) => row.e)}::bigint[],
			${rows.map((row) => row.k)}::text[], ${rows.map((row) => row.f)}::bigint[],
			${rows.map((row) => row.v)}::bigint[], ${rows.map((row) => row.r)}::integer[],
			${rows.map((row) => row.t)}::bigint[], ${rows.map((row) => row.x)}::bigint[],
			${rows.map((row) => row.g)}::bigint[], ${rows.map((row) => Math.round(row.receivedAt))}::bigint[]
		) as row (winder_id, boot, n, e, k, f, v, r, t, x, g, received_ms)
		on conflict do nothing`.execute(trx);
}

async function upsertCursors(trx: Trx, workshopId: string, writes: WinderWrite[]): Promise<void> {
	const rows = writes.flatMap((write) => write.cursors.map((cursor) => ({ ...cursor, winderId: write.winderId })));
	if (rows.length === 0) return;
	await sql`
		insert into boot (workshop_id, winder_id, boot, n, e, forward, reverse, t, first_at, last_at)
		select ${workshopId}::uuid, row.winder_id, row.boot, row.n, row.e, row.f, row.v, row.t,
			to_timestamp(row.first_ms / 1000.0), to_timestamp(row.last_ms / 1000.0)
		from unnest(
			${rows.map((row) => row.winderId)}::uuid[], ${rows.map((row) => row.b)}::text[],
			${rows.map((row) => row.n)}::bigint[], ${rows.map((row) => row.e)}::bigint[],
			${rows.map((row) => row.f)}::bigint[], ${rows.map((row) => row.v)}::bigint[],
			${rows.map((row) => Math.round(row.t))}::bigint[], ${rows.map((row) => Math.round(row.firstAt))}::bigint[],
			${rows.map((row) => Math.round(row.lastAt))}::bigint[]
		) as row (winder_id, boot, n, e, f, v, t, first_ms, last_ms)
		on conflict (workshop_id, winder_id, boot) do update set
			n = greatest(boot.n, excluded.n), e = greatest(boot.e, excluded.e),
			forward = greatest(boot.forward, excluded.forward), reverse = greatest(boot.reverse, excluded.reverse),
			t = greatest(boot.t, excluded.t), last_at = greatest(boot.last_at, excluded.last_at)`.execute(trx);
}

async function insertFacts(trx: Trx, workshopId: string, writes: WinderWrite[]): Promise<void> {
	const rows = writes.flatMap((write) => write.facts.map((fact) => ({ ...fact, winderId: write.winderId })));
	if (rows.length === 0) return;
	const given = sql`
		select row.winder_id, row.no, row.run_id, row.kind, to_timestamp(row.at_ms / 1000.0) as at,
			row.turns, row.detail::jsonb as detail, row.member_id, row.tap_id
		from unnest(
			${rows.map((row) => row.winderId)}::uuid[], ${rows.map((row) => row.no)}::bigint[],
			${rows.map((row) => row.runId)}::uuid[], ${rows.map((row) => row.kind)}::text[],
			${rows.map((row) => Math.round(row.at))}::bigint[],
			${rows.map((row) => (row.turns === null ? null : Math.round(row.turns)))}::integer[],
			${rows.map((row) => JSON.stringify(row.detail))}::text[], ${rows.map((row) => row.memberId)}::uuid[],
			${rows.map((row) => row.tapId)}::uuid[]
		) as row (winder_id, no, run_id, kind, at_ms, turns, detail, member_id, tap_id)`;
	const inserted = await sql`
		insert into fact (workshop_id, winder_id, no, run_id, kind, at, turns, detail, member_id, tap_id)
		select ${workshopId}::uuid, given.* from (${given}) as given
		on conflict (workshop_id, winder_id, no) do nothing`.execute(trx);
	if (Number(inserted.numAffectedRows ?? 0n) === rows.length) return;
	// Some were there: the same ones, written by a try whose answer was lost. A coil put back took its run off them.
	const taken = await sql<{ winder_id: string; no: number; kind: string; stored: string }>`
		select given.winder_id, given.no, given.kind, fact.kind as stored
		from (${given}) as given
		join fact on fact.workshop_id = ${workshopId}::uuid and fact.winder_id = given.winder_id and fact.no = given.no
		where (fact.kind, fact.at, fact.detail) <> (given.kind, given.at, given.detail)
			or fact.turns is distinct from given.turns or fact.member_id is distinct from given.member_id
			or fact.tap_id is distinct from given.tap_id or fact.run_id <> given.run_id
			or (fact.run_id is not null and given.run_id is null)
		limit 1`.execute(trx);
	const other = taken.rows[0];
	if (!other) return;
	throw new FactNumberTaken(
		`Fact ${other.no} of winder ${other.winder_id} is "${other.stored}" on disk and "${other.kind}" here.`
	);
}

async function upsertSnapshots(trx: Trx, workshopId: string, writes: WinderWrite[]): Promise<void> {
	const rows = writes.flatMap(({ winderId, snapshot }) =>
		snapshot
			? [{ winder_id: winderId, state: snapshot.state, fact_no: snapshot.factNo, at_ms: Math.round(snapshot.at) }]
			: []
	);
	for (let at = 0; at < rows.length; at += snapshotsAtOnce) {
		// One JSON text: an array of JSON texts would be written out twice, the second time to escape each quote in it.
		await sql`
			insert into winder_state (workshop_id, winder_id, state, fact_no, saved_at)
			select ${workshopId}::uuid, row.winder_id, row.state, row.fact_no, to_timestamp(row.at_ms / 1000.0)
			from jsonb_to_recordset(${JSON.stringify(rows.slice(at, at + snapshotsAtOnce))}::jsonb)
				as row (winder_id uuid, state jsonb, fact_no bigint, at_ms bigint)
			on conflict (workshop_id, winder_id) do update set
				state = excluded.state, fact_no = excluded.fact_no, saved_at = excluded.saved_at`.execute(trx);
	}
}

async function changeRun(trx: Trx, workshopId: string, winderId: string, change: RunChange): Promise<void> {
	const run = trx.updateTable('run').where('workshop_id', '=', workshopId).where('id', '=', change.runId);
	switch (change.kind) {
		case 'started':
			await run.set({ started_at: new Date(change.at) }).execute();
			return;
		case 'closed': {
			const { figures } = change;
			await run
				.set({
					state: change.state,
					set_aside_reason: change.reason,
					started_at: change.startedAt === null ? null : new Date(change.startedAt),
					ended_at: new Date(change.endedAt),
					ended_by: change.endedBy,
					turns: figures.turns,
					on_bobbin: figures.onBobbin,
					winding_ms: Math.round(figures.windingMs),
					stopped_ms: Math.round(figures.stoppedMs),
					rpm_mean: figures.rpmMean,
					rpm_top: figures.rpmTop,
					taken_back: figures.takenBack,
					looks: JSON.stringify(figures.looks),
					snaps: JSON.stringify(figures.snaps),
					faults: JSON.stringify(figures.faults)
				})
				.execute();
			// A coil that was set aside is still to be wound.
			if (change.state === 'kept') await setCoil(trx, workshopId, change.coilId, 'wound', winderId);
			else await backToHead(trx, workshopId, winderId, change.coilId);
			await writeTrace(trx, workshopId, winderId, change.runId, change.trace);
			return;
		}
		case 'trace':
			await writeTrace(trx, workshopId, winderId, change.runId, change.trace);
			return;
		case 'reopened':
			await run
				.set({
					state: 'open',
					set_aside_reason: null,
					ended_at: null,
					ended_by: null,
					turns: null,
					on_bobbin: null,
					winding_ms: null,
					stopped_ms: null,
					rpm_mean: null,
					rpm_top: null,
					taken_back: null,
					looks: null,
					snaps: null,
					faults: null
				})
				.execute();
			await trx
				.deleteFrom('run_trace')
				.where('workshop_id', '=', workshopId)
				.where('run_id', '=', change.runId)
				.execute();
			await setCoil(trx, workshopId, change.coilId, 'on-bench', change.winderId);
			return;
		case 'put-back':
			await backToHead(trx, workshopId, winderId, change.coilId);
			// What was noted of it stays with the winder, so that the numbers of its facts keep no gap.
			await trx
				.updateTable('fact')
				.set({ run_id: null })
				.where('workshop_id', '=', workshopId)
				.where('run_id', '=', change.runId)
				.execute();
			await trx.deleteFrom('run').where('workshop_id', '=', workshopId).where('id', '=', change.runId).execute();
			return;
		case 'moved':
			await run.set({ winder_id: change.winderId }).execute();
			await setCoil(trx, workshopId, change.coilId, 'on-bench', change.winderId);
	}
}

async function setCoil(
	trx: Trx,
	workshopId: string,
	coilId: string,
	state: 'wound' | 'on-bench',
	winderId: string
): Promise<void> {
	await trx
		.updateTable('coil')
		.set({ state, winder_id: winderId })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', coilId)
		.execute();
}

/** Reads the kept lines of a run's stretches and writes them as one compact row, replacing what was there. */
async function writeTrace(
	trx: Trx,
	workshopId: string,
	winderId: string,
	runId: string,
	stretches: TraceStretch[]
): Promise<void> {
	const points: { atMs: number; turns: number; rpm: number }[] = [];
	for (const stretch of stretches) {
		const lines = await trx
			.selectFrom('kept_line')
			.select(['f', 'v', 'r', 't'])
			.where('workshop_id', '=', workshopId)
			.where('winder_id', '=', winderId)
			.where('boot', '=', stretch.b)
			.where(sql<boolean>`f + v between ${stretch.fromSum}::bigint and ${stretch.toSum}::bigint`)
			.where('t', '>=', Math.floor(stretch.startT))
			.where('t', '<=', Math.ceil(stretch.endT))
			.orderBy('t')
			.orderBy('n')
			.execute();
		for (const line of lines) {
			points.push({
				atMs: Math.round(line.t - stretch.startT),
				turns: stretch.fromTurns + stretch.sign * (line.f - line.v - stretch.fromNet),
				rpm: line.r ?? 0
			});
		}
	}
	const kept = thin(points, tracePointsMax);
	await sql`
		insert into run_trace (workshop_id, run_id, at_ms, turns, rpm)
		values (${workshopId}::uuid, ${runId}::uuid, ${kept.map((point) => point.atMs)}::bigint[],
			${kept.map((point) => point.turns)}::integer[], ${kept.map((point) => point.rpm)}::integer[])
		on conflict (workshop_id, run_id) do update set
			at_ms = excluded.at_ms, turns = excluded.turns, rpm = excluded.rpm`.execute(trx);
}

/** Every so-many-eth of a list, with its first and last. */
function thin<T>(list: T[], most: number): T[] {
	if (list.length <= most) return list;
	const step = (list.length - 1) / (most - 1);
	return Array.from({ length: most }, (_, i) => list[Math.round(i * step)] as T);
}

/** What of a winder is on disk, for the fold to go on from. */
export interface SavedWinder {
	state: object | null;
	factNo: number;
	cursors: Cursor[];
	/** Runs the rows say are open on this winder, the one taken first first. */
	openRuns: { runId: string; plan: CoilPlan; sticker: string; takenAt: number }[];
}

export async function readWinder(trx: Trx, workshopId: string, winderId: string): Promise<SavedWinder> {
	const state = await trx
		.selectFrom('winder_state')
		.select(['state', 'fact_no'])
		.where('workshop_id', '=', workshopId)
		.where('winder_id', '=', winderId)
		.executeTakeFirst();
	const { last_fact } = await trx
		.selectFrom('fact')
		.select((eb) => eb.fn.max('no').as('last_fact'))
		.where('workshop_id', '=', workshopId)
		.where('winder_id', '=', winderId)
		.executeTakeFirstOrThrow();
	const boots = await trx
		.selectFrom('boot')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('winder_id', '=', winderId)
		.orderBy('last_at', 'desc')
		// The newest boots are the ones a snapshot can be behind of.
		.limit(4)
		.execute();
	const runs = await trx
		.selectFrom('run')
		.innerJoin('coil', (join) =>
			join.onRef('coil.workshop_id', '=', 'run.workshop_id').onRef('coil.id', '=', 'run.coil_id')
		)
		.selectAll('run')
		.select('coil.note as coil_note')
		.where('run.workshop_id', '=', workshopId)
		.where('run.winder_id', '=', winderId)
		.where('run.state', '=', 'open')
		.orderBy('run.taken_at')
		.execute();
	return {
		state: state?.state ?? null,
		// No number is given out twice, even where the state is older than the facts.
		factNo: Math.max(state?.fact_no ?? 0, Number(last_fact ?? 0)),
		cursors: boots.map((row) => ({
			b: row.boot,
			n: row.n,
			e: row.e,
			f: row.forward,
			v: row.reverse,
			t: row.t,
			firstAt: row.first_at.getTime(),
			lastAt: row.last_at.getTime()
		})),
		openRuns: runs.map((row) => ({
			runId: row.id,
			sticker: row.sticker ?? '',
			takenAt: row.taken_at.getTime(),
			plan: {
				coilId: row.coil_id,
				name: row.coil_name,
				note: row.coil_note,
				target: row.target,
				lookEvery: row.look_every,
				direction: row.direction,
				topFaces: row.top_faces,
				toleranceTurns: row.tolerance_turns,
				firstLook: row.first_look,
				fullTurns: row.full_turns
			}
		}))
	};
}

/** What a tap of this id did before, among the facts after a number; null: it is new. */
export async function findTap(
	trx: Trx,
	workshopId: string,
	winderId: string,
	tapId: string,
	afterNo: number
): Promise<{ kind: string } | null> {
	const row = await trx
		.selectFrom('fact')
		.select('kind')
		.where('workshop_id', '=', workshopId)
		.where('winder_id', '=', winderId)
		.where('no', '>', afterNo)
		.where('tap_id', '=', tapId)
		.orderBy('no')
		.limit(1)
		.executeTakeFirst();
	return row ?? null;
}

/** The plan of an edited coil goes to its open run as well. null: no bench holds it. */
export async function planOfOpenRun(
	trx: Trx,
	workshopId: string,
	coilId: string
): Promise<{ runId: string; winderId: string; plan: CoilPlan } | null> {
	const coil = await trx
		.selectFrom('coil')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('id', '=', coilId)
		.where('state', '=', 'on-bench')
		.executeTakeFirst();
	if (!coil) return null;
	const run = await trx
		.updateTable('run')
		.set({
			coil_name: coil.name,
			target: coil.target,
			look_every: coil.look_every,
			direction: coil.direction,
			top_faces: coil.top_faces,
			tolerance_turns: coil.tolerance_turns,
			first_look: coil.first_look,
			full_turns: coil.full_turns
		})
		.where('workshop_id', '=', workshopId)
		.where('coil_id', '=', coilId)
		.where('state', '=', 'open')
		.returning(['id', 'winder_id'])
		.executeTakeFirst();
	if (!run) return null;
	return {
		runId: run.id,
		winderId: run.winder_id,
		plan: {
			coilId: coil.id,
			name: coil.name,
			note: coil.note,
			target: coil.target,
			lookEvery: coil.look_every,
			direction: coil.direction,
			topFaces: coil.top_faces,
			toleranceTurns: coil.tolerance_turns,
			firstLook: coil.first_look,
			fullTurns: coil.full_turns
		}
	};
}

/**
 * Removes raw lines received before `before`; a closed run has its trace. Whatever a winder sent since the oldest of its
 * open runs was taken stays. At most some thousand lines a call. Returns how many went.
 */
export async function sweepLines(trx: Trx, workshopId: string, before: Date): Promise<number> {
	const result = await sql`
		delete from kept_line where ctid in (
			select line.ctid from kept_line as line
			where line.workshop_id = ${workshopId}::uuid and line.received_at < ${before}
				and not exists (
					select 1 from run where run.workshop_id = line.workshop_id and run.winder_id = line.winder_id
						and run.state = 'open' and run.taken_at <= line.received_at
				)
			limit ${sweepLinesMax}
		) and workshop_id = ${workshopId}::uuid`.execute(trx);
	return Number(result.numAffectedRows ?? 0n);
}
