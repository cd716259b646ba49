import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import type { TestServer, TestWinder } from '../e2e/server.ts';

/** What is stored of a winder, past every policy. */
export async function winderRows(server: TestServer, winder: TestWinder) {
	return inWorkshop(server.database.owner, server.workshop.id, async (trx) => ({
		boots: await trx.selectFrom('boot').selectAll().where('winder_id', '=', winder.id).execute(),
		events: await trx
			.selectFrom('kept_line')
			.selectAll()
			.where('winder_id', '=', winder.id)
			.where('k', 'is not', null)
			.orderBy('boot')
			.orderBy('e')
			.execute(),
		facts: await trx
			.selectFrom('fact')
			.select(['no', 'kind'])
			.where('winder_id', '=', winder.id)
			.orderBy('no')
			.execute()
	}));
}
