import type { Transaction } from 'kysely';
import type { UnitPreference } from '../../coil/units.ts';
import type { Database } from './schema.ts';

/** The units a person wants values shown in, from their next page on. */
export async function setUnits(
	trx: Transaction<Database>,
	workshopId: string,
	memberId: string,
	units: UnitPreference
): Promise<void> {
	await trx
		.updateTable('member')
		.set({ units: JSON.stringify(units) })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', memberId)
		.execute();
}
