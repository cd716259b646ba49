import { sql, type Selectable, type Transaction } from 'kysely';
import { z } from 'zod';
import type { MeterRange } from '../../coil/measurement.ts';
import { isUuid } from './ids.ts';
import type { Database, MeterTable } from './schema.ts';

type Trx = Transaction<Database>;

/** What reads ohms in this workshop, with its accuracy as its own sheet states it. */
export interface MeterInput {
	name: string;
	/** Smallest first, none twice. */
	ranges: MeterRange[];
}

export interface Meter extends MeterInput {
	id: string;
	createdAt: Date;
}

/** The ranges of the table and of what `readingTo20C` takes, for forms. */
export const meterLimits = {
	nameMax: 80,
	/** No meter in use has more that read ohms. */
	rangesMax: 12,
	upToOhm: [0.1, 1e9],
	percent: [0, 20],
	counts: [0, 1000],
	ohmPerCount: [1e-6, 1e5]
} as const;

const within = (field: 'upToOhm' | 'percent' | 'counts' | 'ohmPerCount') =>
	z.number().min(meterLimits[field][0]).max(meterLimits[field][1]);

const meterRange: z.ZodType<MeterRange> = z.strictObject({
	upToOhm: within('upToOhm'),
	percent: within('percent'),
	counts: within('counts'),
	ohmPerCount: within('ohmPerCount')
});
const meterRanges = z.array(meterRange).min(1).max(meterLimits.rangesMax);

/** Meters in use, by name. */
export async function listMeters(trx: Trx, workshopId: string): Promise<Meter[]> {
	const rows = await trx
		.selectFrom('meter')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('removed_at', 'is', null)
		.orderBy(sql`lower(name)`)
		.orderBy('id')
		.execute();
	return rows.map(toMeter);
}

/** null: unknown, removed or another workshop's. */
export async function findMeter(trx: Trx, workshopId: string, meterId: string): Promise<Meter | null> {
	if (!isUuid(meterId)) return null;
	const row = await trx
		.selectFrom('meter')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('id', '=', meterId)
		.where('removed_at', 'is', null)
		.executeTakeFirst();
	return row ? toMeter(row) : null;
}

/** `name-taken`: one in use has that name, whatever its case. */
export async function addMeter(
	trx: Trx,
	workshopId: string,
	meter: MeterInput
): Promise<{ ok: true; id: string } | { ok: false; why: 'name-taken' }> {
	await lockNames(trx, workshopId);
	const row = await trx
		.insertInto('meter')
		.values({ workshop_id: workshopId, ...columns(meter) })
		.onConflict((conflict) => conflict.doNothing())
		.returning('id')
		.executeTakeFirst();
	return row ? { ok: true, id: row.id } : { ok: false, why: 'name-taken' };
}

/** Readings taken before keep the ranges they were taken with. */
export async function editMeter(
	trx: Trx,
	workshopId: string,
	meterId: string,
	meter: MeterInput
): Promise<'ok' | 'not-found' | 'name-taken'> {
	if (!isUuid(meterId)) return 'not-found';
	await lockNames(trx, workshopId);
	const taken = await trx
		.selectFrom('meter')
		.select('id')
		.where('workshop_id', '=', workshopId)
		.where('removed_at', 'is', null)
		.where('id', '<>', meterId)
		.where(sql<boolean>`lower(name) = lower(${meter.name})`)
		.executeTakeFirst();
	if (taken) return 'name-taken';
	const result = await trx
		.updateTable('meter')
		.set(columns(meter))
		.where('workshop_id', '=', workshopId)
		.where('id', '=', meterId)
		.where('removed_at', 'is', null)
		.executeTakeFirst();
	return result.numUpdatedRows > 0n ? 'ok' : 'not-found';
}

/** Out of use; readings taken with it stay as they are. */
export async function removeMeter(trx: Trx, workshopId: string, meterId: string): Promise<'ok' | 'not-found'> {
	if (!isUuid(meterId)) return 'not-found';
	const result = await trx
		.updateTable('meter')
		.set({ removed_at: sql<Date>`now()` })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', meterId)
		.where('removed_at', 'is', null)
		.executeTakeFirst();
	return result.numUpdatedRows > 0n ? 'ok' : 'not-found';
}

/** Of two that take one name at the same moment the second is told so, where the index alone would raise an error. */
async function lockNames(trx: Trx, workshopId: string): Promise<void> {
	await sql`select pg_advisory_xact_lock(hashtextextended(${`meter names ${workshopId}`}, 0))`.execute(trx);
}

function columns({ name, ranges }: MeterInput) {
	const ascending = [...ranges].sort((a, b) => a.upToOhm - b.upToOhm);
	return { name, ranges: JSON.stringify(meterRanges.parse(ascending)) };
}

const toMeter = (row: Selectable<MeterTable>): Meter => ({
	id: row.id,
	name: row.name,
	ranges: meterRanges.parse(row.ranges),
	createdAt: row.created_at
});
