import { sql, type Selectable, type Transaction } from 'kysely';
import { specContent, type SpecCoil, type SpecContent } from '../../spec/content.ts';
import { readAt20C } from '../../spec/judged.ts';
import type { KeptReading } from '../../spec/kept.ts';
import { fullTurnsOf } from '../../spec/model.ts';
import { addCoil, coilLimits, type Coil } from './coils.ts';
import { isUuid } from './ids.ts';
import { resistanceRead } from './readings.ts';
import type { Database, ReadingTable } from './schema.ts';
import { findSpool } from './spools.ts';

type Trx = Transaction<Database>;

/** One numbered state of a spec. Once something was wound by it, it stays as it is. */
export interface Revision {
	specId: string;
	/** 1, 2, … without a gap. */
	no: number;
	name: string;
	content: SpecContent;
	/** Why it was changed, in the maker's words. */
	why: string;
	createdByName: string | null;
	createdAt: Date;
	savedAt: Date;
	/** When its coils first went to the queue; null: not yet, so saving writes it over. */
	usedAt: Date | null;
}

/** A spec as a list shows it: its latest revision, and what was made of any. */
export interface SpecSummary {
	id: string;
	name: string;
	/** Of the latest revision. */
	no: number;
	revisions: number;
	content: SpecContent;
	savedAt: Date;
	usedAt: Date | null;
	/** Kept runs of any revision. */
	made: number;
	/** Coils of any revision in the queue. */
	waiting: number;
	putAwayAt: Date | null;
}

export interface Spec {
	id: string;
	putAwayAt: Date | null;
	latest: Revision;
	/** All of them, the newest first. */
	revisions: Omit<Revision, 'content'>[];
	/** Kept runs of any revision. */
	made: number;
}

/** Pickups put in the queue at once: two coils each come to what the queue takes at once. */
export const pickupsAtOnceMax = 25;

/** The newest kept coils a calibration learns from. One more than a hundred narrows its band by half a hundredth. */
export const keptReadingsMax = 100;

/** Specs in use, the one saved last first; `putAway`: those out of use instead. */
export async function listSpecs(
	trx: Trx,
	workshopId: string,
	{ putAway = false }: { putAway?: boolean } = {}
): Promise<SpecSummary[]> {
	const rows = await trx
		.selectFrom('spec')
		.innerJoinLateral(
			(eb) =>
				eb
					.selectFrom('spec_revision')
					.select(['no', 'name', 'content', 'saved_at', 'used_at'])
					.whereRef('spec_revision.workshop_id', '=', 'spec.workshop_id')
					.whereRef('spec_revision.spec_id', '=', 'spec.id')
					.orderBy('no', 'desc')
					.limit(1)
					.as('latest'),
			(join) => join.onTrue()
		)
		.select((eb) => [
			'spec.id',
			'spec.put_away_at',
			'latest.no',
			'latest.name',
			'latest.content',
			'latest.saved_at',
			'latest.used_at',
			eb
				.selectFrom('run')
				.whereRef('run.workshop_id', '=', 'spec.workshop_id')
				.whereRef('run.spec_id', '=', 'spec.id')
				.where('run.state', '=', 'kept')
				.select((e) => e.fn.countAll<number>().as('made'))
				.as('made'),
			eb
				.selectFrom('coil')
				.whereRef('coil.workshop_id', '=', 'spec.workshop_id')
				.whereRef('coil.spec_id', '=', 'spec.id')
				.where('coil.state', '=', 'waiting')
				.select((e) => e.fn.countAll<number>().as('waiting'))
				.as('waiting')
		])
		.where('spec.workshop_id', '=', workshopId)
		.where('spec.put_away_at', putAway ? 'is not' : 'is', null)
		.orderBy('latest.saved_at', 'desc')
		.orderBy('spec.id')
		.execute();
	return rows.map((row) => ({
		id: row.id,
		name: row.name,
		no: row.no,
		// Without a gap, so the last number is how many there are.
		revisions: row.no,
		content: specContent.parse(row.content),
		savedAt: row.saved_at,
		usedAt: row.used_at,
		made: row.made ?? 0,
		waiting: row.waiting ?? 0,
		putAwayAt: row.put_away_at
	}));
}

/** As much of a spec in use as choosing one takes. */
export interface SpecChoice {
	id: string;
	/** Of the latest revision. */
	no: number;
	name: string;
	bobbin: SpecContent['bobbin'];
}

/** Specs in use, the one saved last first. */
export async function listSpecChoices(trx: Trx, workshopId: string): Promise<SpecChoice[]> {
	const rows = await trx
		.selectFrom('spec')
		.innerJoin('spec_revision as r', (join) =>
			join.onRef('r.workshop_id', '=', 'spec.workshop_id').onRef('r.spec_id', '=', 'spec.id')
		)
		.select(['spec.id', 'r.no', 'r.name', 'r.saved_at', sql<unknown>`r.content -> 'bobbin'`.as('bobbin')])
		.distinctOn('spec.id')
		.where('spec.workshop_id', '=', workshopId)
		.where('spec.put_away_at', 'is', null)
		.orderBy('spec.id')
		.orderBy('r.no', 'desc')
		.execute();
	return rows
		.sort((a, b) => b.saved_at.getTime() - a.saved_at.getTime())
		.map(({ id, no, name, bobbin }) => ({ id, no, name, bobbin: specContent.shape.bobbin.parse(bobbin) }));
}

/** In use or put away. null: unknown or another workshop's. */
export async function findSpec(trx: Trx, workshopId: string, specId: string): Promise<Spec | null> {
	if (!isUuid(specId)) return null;
	const spec = await trx
		.selectFrom('spec')
		.select((eb) => [
			'spec.id',
			'spec.put_away_at',
			eb
				.selectFrom('run')
				.whereRef('run.workshop_id', '=', 'spec.workshop_id')
				.whereRef('run.spec_id', '=', 'spec.id')
				.where('run.state', '=', 'kept')
				.select((e) => e.fn.countAll<number>().as('made'))
				.as('made')
		])
		.where('spec.workshop_id', '=', workshopId)
		.where('spec.id', '=', specId)
		.executeTakeFirst();
	if (!spec) return null;
	const rows = await revisionsOf(trx, workshopId, specId).orderBy('r.no', 'desc').execute();
	const [latest] = await revisionsOf(trx, workshopId, specId)
		.select('r.content')
		.where('r.no', '=', rows[0]?.no ?? 0)
		.execute();
	if (!latest) throw new Error(`Spec ${specId} has no revision.`);
	return {
		id: spec.id,
		putAwayAt: spec.put_away_at,
		latest: toRevision(latest),
		revisions: rows.map(toHead),
		made: spec.made ?? 0
	};
}

/** null: unknown or another workshop's. */
export async function findRevision(trx: Trx, workshopId: string, specId: string, no: number): Promise<Revision | null> {
	if (!isUuid(specId) || !isRevisionNo(no)) return null;
	const row = await revisionsOf(trx, workshopId, specId).select('r.content').where('r.no', '=', no).executeTakeFirst();
	return row ? toRevision(row) : null;
}

/** A new spec with revision 1. Its id. */
export async function addSpec(trx: Trx, workshopId: string, content: SpecContent, by: string | null): Promise<string> {
	const { id } = await trx
		.insertInto('spec')
		.values({ workshop_id: workshopId, created_by: by })
		.returning('id')
		.executeTakeFirstOrThrow();
	await insertRevision(trx, workshopId, id, { no: 1, content, why: '', by });
	return id;
}

export interface Save {
	/** What the person had before them: a later save of somebody else is never written over. */
	baseNo: number;
	baseSavedAt: Date;
	content: SpecContent;
	why: string;
	by: string | null;
	/** A numbered revision of its own even though the latest was not used yet. */
	asNew: boolean;
}

export type Saved =
	| { ok: true; no: number; made: 'same' | 'new' | 'nothing-new' }
	| { ok: false; why: 'not-found' }
	| { ok: false; why: 'changed-meanwhile'; latest: Revision };

/**
 * Writes the latest revision over while nothing was wound by it, and makes the next one otherwise. Of two who save at once
 * the second is told what the first wrote. The same content again is `nothing-new`, also when it was sent twice.
 */
export async function saveSpec(trx: Trx, workshopId: string, specId: string, save: Save): Promise<Saved> {
	if (!(await lockSpec(trx, workshopId, specId))) return { ok: false, why: 'not-found' };
	const found = await findSpec(trx, workshopId, specId);
	if (!found) return { ok: false, why: 'not-found' };
	const { latest } = found;
	const onBase = latest.no === save.baseNo && latest.savedAt.getTime() === save.baseSavedAt.getTime();
	if (stored(save.content) === stored(latest.content)) {
		// Another reason for what stands there already is worth writing, but makes no revision.
		if (onBase && latest.usedAt === null && save.why !== latest.why) {
			await writeOver(trx, workshopId, latest, save);
			return { ok: true, no: latest.no, made: 'same' };
		}
		return { ok: true, no: latest.no, made: 'nothing-new' };
	}
	if (!onBase) return { ok: false, why: 'changed-meanwhile', latest };
	if (latest.usedAt === null && !save.asNew) {
		await writeOver(trx, workshopId, latest, save);
		return { ok: true, no: latest.no, made: 'same' };
	}
	const no = latest.no + 1;
	await insertRevision(trx, workshopId, specId, { no, content: save.content, why: save.why, by: save.by });
	return { ok: true, no, made: 'new' };
}

export interface Wind {
	specId: string;
	/** Of the revision to wind by. */
	no: number;
	/** 1 to `pickupsAtOnceMax`; all coils of one stand together in the queue. */
	pickups: number;
	/** The spool to wind from; null: not said. */
	spoolId: string | null;
	by: string | null;
}

/**
 * Puts a revision's coils at the end of the queue and freezes it. Afterwards tell `ingest.queueChanged`. `not-found`: an
 * unknown or foreign spec, revision or spool.
 *
 * @throws RangeError for a number of pickups outside the range
 */
export async function windSpec(
	trx: Trx,
	workshopId: string,
	{ specId, no, pickups, spoolId, by }: Wind
): Promise<{ ok: true; coils: Coil[] } | { ok: false; why: 'not-found' | 'put-away' }> {
	if (!Number.isInteger(pickups) || pickups < 1 || pickups > pickupsAtOnceMax)
		throw new RangeError(`${pickups} pickups at once: 1 to ${pickupsAtOnceMax}.`);
	const locked = await lockSpec(trx, workshopId, specId);
	const revision = locked && (await findRevision(trx, workshopId, specId, no));
	const spool = spoolId === null ? null : await findSpool(trx, workshopId, spoolId);
	if (!locked || !revision || (spoolId !== null && !spool)) return { ok: false, why: 'not-found' };
	if (locked.putAwayAt) return { ok: false, why: 'put-away' };
	await trx
		.updateTable('spec_revision')
		.set((eb) => ({ used_at: eb.fn.coalesce('used_at', sql<Date>`now()`) }))
		.where('workshop_id', '=', workshopId)
		.where('spec_id', '=', specId)
		.where('no', '=', no)
		.execute();
	const { content } = revision;
	const fullTurns = fullTurnsOf(content, spool?.wire ?? null);
	const coils: Coil[] = [];
	for (let pickup = 0; pickup < pickups; pickup += 1) {
		for (const [i, coil] of content.coils.entries()) {
			const added = await addCoil(
				trx,
				workshopId,
				{
					name: queueName(content.name, coil.name),
					note: queueNote(coil),
					target: coil.turns,
					lookEvery: content.looks.every,
					direction: coil.direction,
					topFaces: 'out',
					toleranceTurns: coil.toleranceTurns
				},
				{
					createdBy: by,
					spec: { id: specId, no, coil: i },
					spoolId,
					// The first bobbin of what is wound together shows whether all is set up right.
					firstLook: coils.length === 0 ? content.looks.first : 0,
					fullTurns
				}
			);
			coils.push(added);
		}
	}
	return { ok: true, coils };
}

/** Out of the list of what is wound here, or back into it. Revisions and what was made of them stay. */
export async function putAway(
	trx: Trx,
	workshopId: string,
	specId: string,
	away: boolean
): Promise<'ok' | 'not-found'> {
	if (!isUuid(specId)) return 'not-found';
	const result = await trx
		.updateTable('spec')
		.set((eb) => ({ put_away_at: away ? eb.fn.coalesce('put_away_at', sql<Date>`now()`) : null }))
		.where('workshop_id', '=', workshopId)
		.where('id', '=', specId)
		.executeTakeFirst();
	return result.numUpdatedRows > 0n ? 'ok' : 'not-found';
}

/**
 * Kept coils of one bobbin, by its name whatever the case, and one spool, the one kept last first, with the newest reading
 * of each kind that was not struck out. Without a spool none: what two reels measure per metre may differ.
 *
 * Resistance counts before assembly, where leads and a second coil join it; width before the tape. Inductance counts at
 * any stage but under a cover, which lowers it.
 */
export async function keptReadings(
	trx: Trx,
	workshopId: string,
	{ bobbinName, spoolId }: { bobbinName: string; spoolId: string | null }
): Promise<KeptReading[]> {
	if (spoolId === null || !isUuid(spoolId)) return [];
	const runs = await trx
		.selectFrom('run')
		.innerJoin('spec_revision as r', (join) =>
			join
				.onRef('r.workshop_id', '=', 'run.workshop_id')
				.onRef('r.spec_id', '=', 'run.spec_id')
				.onRef('r.no', '=', 'run.spec_revision_no')
		)
		.select(['run.id', 'run.sticker', 'run.coil_name', 'run.on_bobbin', 'run.ended_at', 'r.no', 'r.content'])
		.where('run.workshop_id', '=', workshopId)
		.where('run.state', '=', 'kept')
		.where('run.on_bobbin', '>=', 1)
		.where('run.spool_id', '=', spoolId)
		.where(sql<boolean>`lower(btrim(r.content #>> '{bobbin,name}')) = lower(btrim(${bobbinName}))`)
		.orderBy('run.ended_at', 'desc')
		.orderBy('run.id', 'desc')
		.limit(keptReadingsMax)
		.execute();
	if (runs.length === 0) return [];
	const readings = await trx
		.selectFrom('reading')
		.selectAll()
		.distinctOn(['run_id', 'kind'])
		.where('workshop_id', '=', workshopId)
		.where(sql<boolean>`run_id = any(${runs.map((run) => run.id)}::uuid[])`)
		.where('struck_at', 'is', null)
		.where((eb) =>
			eb.or([
				eb('kind', '=', 'resistance').and('stage', 'in', ['wound', 'leads', 'tape']),
				eb('kind', '=', 'outer-width').and('stage', 'in', ['wound', 'leads']),
				eb('kind', '=', 'inductance').and('stage', '<>', 'covered')
			])
		)
		.orderBy('run_id')
		.orderBy('kind')
		.orderBy('taken_at', 'desc')
		.orderBy('id')
		.execute();
	return runs.map((run): KeptReading => {
		const of = (kind: ReadingTable['kind']) =>
			readings.find((reading) => reading.run_id === run.id && reading.kind === kind) ?? null;
		const { name, straightM, endDiameterM, traverseM } = specContent.parse(run.content).bobbin;
		const width = of('outer-width');
		return {
			runId: run.id,
			sticker: run.sticker ?? '',
			name: run.coil_name,
			turns: run.on_bobbin ?? 0,
			endedAt: run.ended_at?.toISOString() ?? '',
			specRevisionNo: run.no,
			bobbin: { name, straightM, endDiameterM, traverseM },
			...resistanceOf(of('resistance')),
			outerWidthM: width?.value ?? null,
			outerWidthHalfWidthM: width?.half_width ?? widthHalfWidthM,
			inductanceH: of('inductance')?.value ?? null
		};
	});
}

/** Of a caliper on a coil, which gives way under its jaws. Common practice, no source. */
const widthHalfWidthM = 0.0001;

function resistanceOf(
	reading: Selectable<ReadingTable> | null
): Pick<KeptReading, 'ohmAt20C' | 'open' | 'uncertaintyOhm' | 'meterOhm'> {
	const none = { ohmAt20C: null, open: false, uncertaintyOhm: 0, meterOhm: 0 };
	if (!reading) return none;
	const at20C = readAt20C(resistanceRead(reading));
	// Beyond any coil: told as it is, to be known for an open one.
	if (!at20C.ok) return at20C.field === 'ohm' ? { ...none, ohmAt20C: reading.value } : none;
	if (at20C.value === null) return { ...none, open: true };
	const { ohm, uncertaintyOhm, meterOhm } = at20C.value;
	return { ohmAt20C: ohm, open: false, uncertaintyOhm, meterOhm };
}

const isRevisionNo = (no: number): boolean => Number.isInteger(no) && no >= 1 && no <= 10_000;

/** One text for one content: the schema puts the keys in its own order. */
const stored = (content: SpecContent): string => JSON.stringify(specContent.parse(content));

/** Who changes a spec or winds by it waits here for whoever does so at the same moment. */
async function lockSpec(trx: Trx, workshopId: string, specId: string): Promise<{ putAwayAt: Date | null } | null> {
	if (!isUuid(specId)) return null;
	const row = await trx
		.selectFrom('spec')
		.select('put_away_at')
		.where('workshop_id', '=', workshopId)
		.where('id', '=', specId)
		.forUpdate()
		.executeTakeFirst();
	return row ? { putAwayAt: row.put_away_at } : null;
}

async function insertRevision(
	trx: Trx,
	workshopId: string,
	specId: string,
	{ no, content, why, by }: { no: number; content: SpecContent; why: string; by: string | null }
): Promise<void> {
	await trx
		.insertInto('spec_revision')
		.values({
			workshop_id: workshopId,
			spec_id: specId,
			no,
			name: content.name,
			content: stored(content),
			why,
			created_by: by,
			saved_at: sql<Date>`date_trunc('milliseconds', clock_timestamp())`
		})
		.execute();
}

async function writeOver(trx: Trx, workshopId: string, latest: Revision, save: Save): Promise<void> {
	await trx
		.updateTable('spec_revision')
		.set({
			name: save.content.name,
			content: stored(save.content),
			why: save.why,
			created_by: save.by,
			// Whole milliseconds, as a page hands it back, and never the same twice: it tells one save from the next.
			saved_at: sql<Date>`greatest(date_trunc('milliseconds', clock_timestamp()), saved_at + interval '1 millisecond')`
		})
		.where('workshop_id', '=', workshopId)
		.where('spec_id', '=', latest.specId)
		.where('no', '=', latest.no)
		.execute();
}

function revisionsOf(trx: Trx, workshopId: string, specId: string) {
	return trx
		.selectFrom('spec_revision as r')
		.leftJoin('member', (join) =>
			join.onRef('member.workshop_id', '=', 'r.workshop_id').onRef('member.id', '=', 'r.created_by')
		)
		.select(['r.spec_id', 'r.no', 'r.name', 'r.why', 'r.created_at', 'r.saved_at', 'r.used_at'])
		.select('member.name as created_by_name')
		.where('r.workshop_id', '=', workshopId)
		.where('r.spec_id', '=', specId);
}

type Head = Awaited<ReturnType<ReturnType<typeof revisionsOf>['execute']>>[number];

function toHead(row: Head): Omit<Revision, 'content'> {
	return {
		specId: row.spec_id,
		no: row.no,
		name: row.name,
		why: row.why,
		createdByName: row.created_by_name,
		createdAt: row.created_at,
		savedAt: row.saved_at,
		usedAt: row.used_at
	};
}

const toRevision = (row: Head & { content: unknown }): Revision => ({
	...toHead(row),
	content: specContent.parse(row.content)
});

/** "Evening bridge · Screw coil", in as many characters as a coil's name has at most. */
function queueName(spec: string, coil: string): string {
	const coilName = clipped(coil, Math.floor(coilLimits.nameMax / 2));
	return `${clipped(spec, coilLimits.nameMax - 3 - [...coilName].length)} · ${coilName}`;
}

function clipped(text: string, charactersMax: number): string {
	const characters = [...text];
	return characters.length <= charactersMax ? text : `${characters.slice(0, charactersMax - 1).join('')}…`;
}

/** Where the wire starts and ends, for the bench. */
function queueNote({ start, finish }: SpecCoil): string {
	const words = [start && `Start: ${start}`, finish && `Finish: ${finish}`].filter((line) => line !== '');
	return clipped(words.join('\n'), coilLimits.noteMax);
}
