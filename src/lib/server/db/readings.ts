import { sql, type Selectable, type Transaction } from 'kysely';
import type { MeterRange } from '../../coil/measurement.ts';
import type { ResistanceRead } from '../../spec/judged.ts';
import { canonicalId, isUuid } from './ids.ts';
import type { Database, ReadingKind, ReadingStage, ReadingTable } from './schema.ts';

type Trx = Transaction<Database>;

/** One measured value of one coil, with its instrument, temperature and stage. SI. */
export interface ReadingInput {
	kind: ReadingKind;
	stage: ReadingStage;
	/** Ω, H or m; null: a resistance beyond every range of the meter. */
	value: number | null;
	/** Of the coil, in °C, and how far it may be off either way; of a resistance it is always known. */
	temperatureC: number | null;
	temperatureHalfWidthC: number | null;
	meterId: string | null;
	/** Range the value was read on; null: without one of the workshop's meters. */
	meterRange: MeterRange | null;
	/** How far the value may be off either way where no meter says so. */
	halfWidth: number | null;
	note: string;
}

export interface Reading extends ReadingInput {
	id: string;
	runId: string;
	/** As it was called when the reading was taken; empty without one. */
	meterName: string;
	takenAt: Date;
	takenByName: string | null;
	struckAt: Date | null;
	struckByName: string | null;
}

/** Of one run, struck ones included: whoever needs more than this reads something else into the book. */
export const readingsMax = 200;

/** Of one run, the newest first, struck ones among them. */
export async function listReadings(trx: Trx, workshopId: string, runId: string): Promise<Reading[]> {
	if (!isUuid(runId)) return [];
	const rows = await readings(trx, workshopId)
		.where('reading.run_id', '=', runId)
		.orderBy('reading.taken_at', 'desc')
		.orderBy('reading.id')
		.execute();
	return rows.map(toReading);
}

export type ReadingAdded =
	/** `before`: the same form came in earlier; what stood in it then is what is kept. */
	| { ok: true; made: 'new' | 'before' }
	/** `open`: the coil is still on the bench. `meter-gone`: no such meter in use. */
	| { ok: false; why: 'not-found' | 'open' | 'meter-gone' | 'too-many' };

/**
 * Keeps a reading of a run that is kept or set aside.
 *
 * @param id made with the form, so that sending it twice makes one reading
 */
export async function addReading(
	trx: Trx,
	workshopId: string,
	runId: string,
	reading: ReadingInput & { id: string; by: string | null }
): Promise<ReadingAdded> {
	if (!isUuid(runId) || !isUuid(reading.id)) return { ok: false, why: 'not-found' };
	// Locked, so that of a form sent twice at one moment the second sees the first, and the most are never passed.
	const run = await trx
		.selectFrom('run')
		.select('state')
		.where('workshop_id', '=', workshopId)
		.where('id', '=', runId)
		.forUpdate()
		.executeTakeFirst();
	if (!run) return { ok: false, why: 'not-found' };
	if (run.state === 'open') return { ok: false, why: 'open' };
	const before = await trx
		.selectFrom('reading')
		.select('run_id')
		.where('workshop_id', '=', workshopId)
		.where('id', '=', reading.id)
		.executeTakeFirst();
	if (before)
		return before.run_id === canonicalId(runId) ? { ok: true, made: 'before' } : { ok: false, why: 'not-found' };
	const { count } = await trx
		.selectFrom('reading')
		.select((eb) => eb.fn.countAll<number>().as('count'))
		.where('workshop_id', '=', workshopId)
		.where('run_id', '=', runId)
		.executeTakeFirstOrThrow();
	if (Number(count) >= readingsMax) return { ok: false, why: 'too-many' };
	let meterName = '';
	if (reading.meterId !== null) {
		const meter = isUuid(reading.meterId)
			? await trx
					.selectFrom('meter')
					.select('name')
					.where('workshop_id', '=', workshopId)
					.where('id', '=', reading.meterId)
					.where('removed_at', 'is', null)
					.executeTakeFirst()
			: undefined;
		if (!meter) return { ok: false, why: 'meter-gone' };
		meterName = meter.name;
	}
	await trx
		.insertInto('reading')
		.values({
			workshop_id: workshopId,
			id: reading.id,
			run_id: runId,
			kind: reading.kind,
			stage: reading.stage,
			value: reading.value,
			temperature_c: reading.temperatureC,
			temperature_half_width_c: reading.temperatureHalfWidthC,
			meter_id: reading.meterId,
			meter_name: meterName,
			meter_range: reading.meterRange === null ? null : JSON.stringify(reading.meterRange),
			half_width: reading.halfWidth,
			note: reading.note,
			taken_by: reading.by
		})
		.execute();
	return { ok: true, made: 'new' };
}

/** A wrong reading is struck out and stays to be seen. Striking it again changes nothing: who was first stands. */
export async function strikeReading(
	trx: Trx,
	workshopId: string,
	runId: string,
	readingId: string,
	by: string | null
): Promise<'ok' | 'not-found'> {
	if (!isUuid(runId) || !isUuid(readingId)) return 'not-found';
	const row = await trx
		.updateTable('reading')
		.set({
			struck_at: sql<Date>`coalesce(struck_at, now())`,
			struck_by: sql<string | null>`case when struck_at is null then ${by}::uuid else struck_by end`
		})
		.where('workshop_id', '=', workshopId)
		.where('run_id', '=', runId)
		.where('id', '=', readingId)
		.returning('id')
		.executeTakeFirst();
	return row ? 'ok' : 'not-found';
}

/** A coil's newest resistance read with one meter on one range. */
export interface Neighbour {
	runId: string;
	name: string;
	sticker: string | null;
	endedAt: Date | null;
	turns: number | null;
	ohm: number;
	temperatureC: number;
	temperatureHalfWidthC: number;
	stage: ReadingStage;
}

/**
 * Kept coils of the same spec revision whose resistance was read with the same meter on the same range, those wound nearest
 * in time first: the other coil of the pickup, and others like it.
 */
export async function neighboursOf(
	trx: Trx,
	workshopId: string,
	run: { id: string; spec: { id: string; no: number }; endedAt: Date },
	meter: { id: string; range: MeterRange },
	limit: number
): Promise<Neighbour[]> {
	const rows = await trx
		.selectFrom('run')
		.innerJoin('reading', (join) =>
			join.onRef('reading.workshop_id', '=', 'run.workshop_id').onRef('reading.run_id', '=', 'run.id')
		)
		.select([
			'run.id',
			'run.coil_name',
			'run.sticker',
			'run.ended_at',
			'run.on_bobbin',
			'reading.value',
			'reading.temperature_c',
			'reading.temperature_half_width_c',
			'reading.stage'
		])
		.where('run.workshop_id', '=', workshopId)
		.where('run.state', '=', 'kept')
		.where('run.spec_id', '=', run.spec.id)
		.where('run.spec_revision_no', '=', run.spec.no)
		.where('run.id', '<>', run.id)
		.where(
			'reading.id',
			'=',
			sql<string>`(
				select newest.id from reading as newest
				where newest.workshop_id = run.workshop_id and newest.run_id = run.id
					and newest.kind = 'resistance' and newest.struck_at is null and newest.value is not null
					and newest.meter_id = ${meter.id}::uuid and newest.meter_range = ${JSON.stringify(meter.range)}::jsonb
				order by newest.taken_at desc, newest.id limit 1)`
		)
		.orderBy(sql`abs(extract(epoch from run.ended_at - ${run.endedAt}::timestamptz))`)
		.orderBy('run.id')
		.limit(limit)
		.execute();
	return rows.map((row) => ({
		runId: row.id,
		name: row.coil_name,
		sticker: row.sticker,
		endedAt: row.ended_at,
		turns: row.on_bobbin,
		ohm: row.value ?? 0,
		temperatureC: row.temperature_c ?? 20,
		temperatureHalfWidthC: row.temperature_half_width_c ?? 0,
		stage: row.stage
	}));
}

/** A row of resistance as the computation takes it. */
export const resistanceRead = (
	row: Pick<
		Selectable<ReadingTable>,
		'value' | 'temperature_c' | 'temperature_half_width_c' | 'meter_range' | 'half_width'
	>
): ResistanceRead => ({
	ohm: row.value,
	// Of a resistance both are known.
	temperatureC: row.temperature_c ?? 20,
	temperatureHalfWidthC: row.temperature_half_width_c ?? 0,
	range: row.meter_range,
	halfWidthOhm: row.half_width
});

function readings(trx: Trx, workshopId: string) {
	return trx
		.selectFrom('reading')
		.leftJoin('member as taker', (join) =>
			join.onRef('taker.workshop_id', '=', 'reading.workshop_id').onRef('taker.id', '=', 'reading.taken_by')
		)
		.leftJoin('member as striker', (join) =>
			join.onRef('striker.workshop_id', '=', 'reading.workshop_id').onRef('striker.id', '=', 'reading.struck_by')
		)
		.selectAll('reading')
		.select(['taker.name as taken_by_name', 'striker.name as struck_by_name'])
		.where('reading.workshop_id', '=', workshopId);
}

type Row = Selectable<ReadingTable> & { taken_by_name: string | null; struck_by_name: string | null };

const toReading = (row: Row): Reading => ({
	id: row.id,
	runId: row.run_id,
	kind: row.kind,
	stage: row.stage,
	value: row.value,
	temperatureC: row.temperature_c,
	temperatureHalfWidthC: row.temperature_half_width_c,
	meterId: row.meter_id,
	meterName: row.meter_name,
	meterRange: row.meter_range,
	halfWidth: row.half_width,
	note: row.note,
	takenAt: row.taken_at,
	takenByName: row.taken_by_name,
	struckAt: row.struck_at,
	struckByName: row.struck_by_name
});
