import { sql, type Selectable, type Transaction } from 'kysely';
import type { Direction, Look, Snap, TopFaces } from '../../winding/types.ts';
import { fromSpec, type FromSpec } from './coils.ts';
import { isUuid } from './ids.ts';
import type { Database, RunTable } from './schema.ts';
import { findSpool } from './spools.ts';

/** One attempt at winding one coil, as the record keeps it. Figures are null while it is open. */
export interface Run extends FromSpec {
	id: string;
	coilId: string;
	winderId: string;
	winderName: string;
	name: string;
	target: number;
	lookEvery: number;
	direction: Direction;
	topFaces: TopFaces;
	toleranceTurns: number;
	state: 'open' | 'kept' | 'set-aside';
	setAsideReason: string | null;
	takenAt: Date;
	startedAt: Date | null;
	endedAt: Date | null;
	/** Member who kept it or set it aside; null while open, or when it kept itself. */
	endedBy: string | null;
	endedByName: string | null;
	sticker: string | null;
	turns: number | null;
	onBobbin: number | null;
	windingMs: number | null;
	stoppedMs: number | null;
	rpmMean: number | null;
	rpmTop: number | null;
	takenBack: number | null;
	looks: Look[];
	snaps: Snap[];
	faults: string[];
	note: string;
}

export interface RunFact {
	no: number;
	kind: string;
	at: Date;
	turns: number | null;
	detail: Record<string, string | number | boolean | null>;
	memberName: string | null;
}

/** Parallel arrays: device milliseconds since the run's first line, turns, signed rpm. */
export interface RunTrace {
	atMs: number[];
	turns: number[];
	rpm: number[];
}

export interface RunFilter {
	/** Part of the coil's name, the note or the sticker code, whatever the case. */
	q?: string;
	/** Taken on the bench at or after, before. */
	from?: Date;
	to?: Date;
	state?: 'open' | 'kept' | 'set-aside';
	/** From the answer before. */
	cursor?: string;
	/** 1 to 200. */
	limit: number;
}

type Trx = Transaction<Database>;

/** Runs, the one taken last first. `bad-cursor`: the cursor is none of ours. */
export async function listRuns(
	trx: Trx,
	workshopId: string,
	filter: RunFilter
): Promise<{ ok: true; runs: Run[]; nextCursor: string | null } | { ok: false; why: 'bad-cursor' }> {
	let query = runsWithNames(trx, workshopId);
	if (filter.q) {
		const like = `%${filter.q.replace(/[\\%_]/g, '\\$&')}%`;
		query = query.where((eb) =>
			eb.or([eb('run.coil_name', 'ilike', like), eb('run.note', 'ilike', like), eb('run.sticker', 'ilike', like)])
		);
	}
	if (filter.from) query = query.where('run.taken_at', '>=', filter.from);
	if (filter.to) query = query.where('run.taken_at', '<', filter.to);
	if (filter.state) query = query.where('run.state', '=', filter.state);
	if (filter.cursor) {
		const after = readCursor(filter.cursor);
		if (!after) return { ok: false, why: 'bad-cursor' };
		query = query.where(sql<boolean>`(run.taken_at, run.id) < (${after.takenAt}::timestamptz, ${after.id}::uuid)`);
	}
	const rows = await query
		.orderBy('run.taken_at', 'desc')
		.orderBy('run.id', 'desc')
		.limit(filter.limit + 1)
		.execute();
	const page = rows.slice(0, filter.limit).map(toRun);
	const last = page.at(-1);
	return { ok: true, runs: page, nextCursor: rows.length > filter.limit && last ? writeCursor(last) : null };
}

/** null: unknown or another workshop's. */
export async function findRun(trx: Trx, workshopId: string, runId: string): Promise<Run | null> {
	if (!isUuid(runId)) return null;
	const row = await runsWithNames(trx, workshopId).where('run.id', '=', runId).executeTakeFirst();
	return row ? toRun(row) : null;
}

/** What happened during a run, in the recorder's order. */
export async function factsOfRun(trx: Trx, workshopId: string, runId: string): Promise<RunFact[]> {
	const rows = await trx
		.selectFrom('fact')
		.leftJoin('member', (join) =>
			join.onRef('member.workshop_id', '=', 'fact.workshop_id').onRef('member.id', '=', 'fact.member_id')
		)
		.select(['fact.no', 'fact.kind', 'fact.at', 'fact.turns', 'fact.detail', 'member.name as member_name'])
		.where('fact.workshop_id', '=', workshopId)
		.where('fact.run_id', '=', runId)
		.orderBy('fact.no')
		.execute();
	return rows.map((row) => ({
		no: row.no,
		kind: row.kind,
		at: row.at,
		turns: row.turns,
		detail: row.detail,
		memberName: row.member_name
	}));
}

/** The compact trace of a closed run; null while it is open. */
export async function traceOfRun(trx: Trx, workshopId: string, runId: string): Promise<RunTrace | null> {
	const row = await trx
		.selectFrom('run_trace')
		.select(['at_ms', 'turns', 'rpm'])
		.where('workshop_id', '=', workshopId)
		.where('run_id', '=', runId)
		.executeTakeFirst();
	return row ? { atMs: row.at_ms, turns: row.turns, rpm: row.rpm } : null;
}

/** The maker's words on a run. */
export async function noteRun(trx: Trx, workshopId: string, runId: string, note: string): Promise<'ok' | 'not-found'> {
	if (!isUuid(runId)) return 'not-found';
	const result = await trx
		.updateTable('run')
		.set({ note })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', runId)
		.executeTakeFirst();
	return result.numUpdatedRows > 0n ? 'ok' : 'not-found';
}

/** Says which spool a run's wire came from, or that nobody knows (null). An unknown or foreign spool is `not-found` too. */
export async function setRunSpool(
	trx: Trx,
	workshopId: string,
	runId: string,
	spoolId: string | null
): Promise<'ok' | 'not-found'> {
	if (!isUuid(runId)) return 'not-found';
	if (spoolId !== null && !(await findSpool(trx, workshopId, spoolId))) return 'not-found';
	const result = await trx
		.updateTable('run')
		.set({ spool_id: spoolId })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', runId)
		.executeTakeFirst();
	return result.numUpdatedRows > 0n ? 'ok' : 'not-found';
}

function runsWithNames(trx: Trx, workshopId: string) {
	return trx
		.selectFrom('run')
		.innerJoin('winder', (join) =>
			join.onRef('winder.workshop_id', '=', 'run.workshop_id').onRef('winder.id', '=', 'run.winder_id')
		)
		.leftJoin('member', (join) =>
			join.onRef('member.workshop_id', '=', 'run.workshop_id').onRef('member.id', '=', 'run.ended_by')
		)
		.selectAll('run')
		.select(['winder.name as winder_name', 'member.name as ended_by_name'])
		.where('run.workshop_id', '=', workshopId);
}

function toRun(row: Selectable<RunTable> & { winder_name: string; ended_by_name: string | null }): Run {
	return {
		id: row.id,
		coilId: row.coil_id,
		winderId: row.winder_id,
		winderName: row.winder_name,
		name: row.coil_name,
		target: row.target,
		lookEvery: row.look_every,
		direction: row.direction,
		topFaces: row.top_faces,
		toleranceTurns: row.tolerance_turns,
		state: row.state,
		setAsideReason: row.set_aside_reason,
		takenAt: row.taken_at,
		startedAt: row.started_at,
		endedAt: row.ended_at,
		endedBy: row.ended_by,
		endedByName: row.ended_by_name,
		sticker: row.sticker,
		turns: row.turns,
		onBobbin: row.on_bobbin,
		windingMs: row.winding_ms,
		stoppedMs: row.stopped_ms,
		rpmMean: row.rpm_mean,
		rpmTop: row.rpm_top,
		takenBack: row.taken_back,
		looks: row.looks ?? [],
		snaps: row.snaps ?? [],
		faults: row.faults ?? [],
		note: row.note,
		...fromSpec(row)
	};
}

function writeCursor(run: Run): string {
	return Buffer.from(`${run.takenAt.toISOString()} ${run.id}`).toString('base64url');
}

function readCursor(cursor: string): { takenAt: Date; id: string } | null {
	const [at = '', id = ''] = Buffer.from(cursor, 'base64url').toString('utf8').split(' ');
	const takenAt = new Date(at);
	return !Number.isNaN(takenAt.getTime()) && isUuid(id) ? { takenAt, id } : null;
}
