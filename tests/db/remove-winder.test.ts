import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { addCoil, takeNextCoil } from '../../src/lib/server/db/coils.ts';
import { addWinder, findLinkKey, findWinder, newLinkKey, removeWinder } from '../../src/lib/server/db/winders.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let workshopId: string;
let otherId: string;

const settings = {
	name: 'w-01',
	pulsesPerTurn: 1,
	rpmMax: 2000,
	seesDirection: false,
	forwardIs: 'counter-clockwise' as const,
	easeEarlyTurns: 40,
	stopEarlyTurns: 3,
	keepAfterS: null
};
const coil = {
	name: 'Middle',
	note: '',
	target: 7600,
	lookEvery: 500,
	direction: 'clockwise' as const,
	topFaces: 'out' as const,
	toleranceTurns: 5
};

async function workshop(shortName: string): Promise<string> {
	const row = await db.owner
		.insertInto('workshop')
		.values({ short_name: shortName, name: shortName, time_zone: 'UTC' })
		.returning('id')
		.executeTakeFirstOrThrow();
	return row.id;
}

async function winderOf(id: string): Promise<string> {
	const added = await inWorkshop(db.app, id, (trx) => addWinder(trx, id, settings));
	if (!added.ok) throw new Error(added.why);
	return added.winder.id;
}

const remove = (winderId: string) => inWorkshop(db.app, workshopId, (trx) => removeWinder(trx, workshopId, winderId));

beforeAll(async () => {
	db = await freshDatabase();
	workshopId = await workshop('hollow-lane');
	otherId = await workshop('other');
});

afterAll(async () => {
	await db?.drop();
});

describe('removing a winder', () => {
	it('waits for the coil on its bench, then takes its key and its name out of use', async () => {
		const winderId = await winderOf(workshopId);
		const { linkKey, taken } = await inWorkshop(db.app, workshopId, async (trx) => {
			await addCoil(trx, workshopId, coil, { createdBy: null });
			return {
				linkKey: (await newLinkKey(trx, workshopId, winderId)) ?? '',
				taken: await takeNextCoil(trx, workshopId, winderId, new Date())
			};
		});
		expect(await remove(winderId)).toBe('has-run');
		expect(await findLinkKey(db.app, linkKey)).toEqual({ workshopId, winderId });

		// The maker sets it aside.
		await db.owner
			.updateTable('run')
			.set({ state: 'set-aside', ended_at: new Date() })
			.where('id', '=', taken?.runId ?? '')
			.execute();
		expect(await remove(winderId)).toBe('ok');
		expect(await findLinkKey(db.app, linkKey)).toBeNull();
		expect(await inWorkshop(db.app, workshopId, (trx) => findWinder(trx, workshopId, winderId))).toBeNull();
		expect(await remove(winderId)).toBe('not-found');
		// Another may bear the name now.
		expect(await winderOf(workshopId)).not.toBe(winderId);
	});

	it('of another workshop finds nothing and leaves it in use', async () => {
		const theirs = await winderOf(otherId);
		expect(await remove(theirs)).toBe('not-found');
		expect(await inWorkshop(db.app, otherId, (trx) => findWinder(trx, otherId, theirs))).not.toBeNull();
	});

	it('that is no id finds nothing', async () => {
		expect(await remove('w-01')).toBe('not-found');
	});
});
