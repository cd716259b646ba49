import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import {
	addMeter,
	editMeter,
	findMeter,
	listMeters,
	removeMeter,
	type MeterInput
} from '../../src/lib/server/db/meters.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let shop: string;
let other: string;

const range = (upToOhm: number) => ({ upToOhm, percent: 0.8, counts: 2, ohmPerCount: upToOhm / 2000 });
const bench: MeterInput = { name: 'Bench meter', ranges: [range(2_000), range(20_000)] };

async function workshop(shortName: string): Promise<string> {
	const row = await db.owner
		.insertInto('workshop')
		.values({ short_name: shortName, name: shortName, time_zone: 'UTC' })
		.returning('id')
		.executeTakeFirstOrThrow();
	return row.id;
}
const inShop = <T>(work: Parameters<typeof inWorkshop<T>>[2], at = shop) => inWorkshop<T>(db.app, at, work);
const made = async (meter: MeterInput, at = shop): Promise<string> => {
	const answer = await inShop((trx) => addMeter(trx, at, meter), at);
	if (!answer.ok) throw new Error(answer.why);
	return answer.id;
};

beforeAll(async () => {
	db = await freshDatabase();
	shop = await workshop('hollow-lane');
	other = await workshop('mill-yard');
});
afterAll(() => db.drop());

describe('meters', () => {
	it('keeps the ranges of a meter, the smallest first', async () => {
		const id = await made({ ...bench, ranges: [range(20_000), range(2_000)] });
		expect(await inShop((trx) => findMeter(trx, shop, id))).toMatchObject({ id, ...bench });
	});

	it('has one meter of a name, whatever its case, and takes the name of one removed', async () => {
		const id = await made({ ...bench, name: 'Old meter' });
		const again = { ...bench, name: 'OLD METER' };
		expect(await inShop((trx) => addMeter(trx, shop, again))).toEqual({ ok: false, why: 'name-taken' });
		expect(await inShop((trx) => removeMeter(trx, shop, id))).toBe('ok');
		expect(await inShop((trx) => removeMeter(trx, shop, id))).toBe('not-found');
		expect((await inShop((trx) => addMeter(trx, shop, again))).ok).toBe(true);
	});

	it('edits a meter, but not into the name of another', async () => {
		const id = await made({ ...bench, name: 'Pocket meter' });
		const changed = { name: 'Pocket meter', ranges: [range(200)] };
		expect(await inShop((trx) => editMeter(trx, shop, id, changed))).toBe('ok');
		expect(await inShop((trx) => findMeter(trx, shop, id))).toMatchObject(changed);
		expect(await inShop((trx) => editMeter(trx, shop, id, { ...changed, name: 'bench METER' }))).toBe('name-taken');
	});

	it('of two that take one name at the same moment lets one have it and tells the other', async () => {
		for (let i = 0; i < 10; i++) {
			const id = await made({ ...bench, name: `Old name ${i}` });
			const name = `New name ${i}`;
			const [added, edited] = await Promise.all([
				inShop((trx) => addMeter(trx, shop, { ...bench, name })),
				inShop((trx) => editMeter(trx, shop, id, { ...bench, name }))
			]);
			expect([added.ok, edited]).toEqual(added.ok ? [true, 'name-taken'] : [false, 'ok']);
		}
	});

	it('shows, changes and removes nothing of another workshop', async () => {
		const theirs = await made(bench, other);
		expect((await inShop((trx) => listMeters(trx, shop))).map(({ id }) => id)).not.toContain(theirs);
		expect(await inShop((trx) => findMeter(trx, shop, theirs))).toBeNull();
		expect(await inShop((trx) => editMeter(trx, shop, theirs, { ...bench, name: 'Ours' }))).toBe('not-found');
		expect(await inShop((trx) => removeMeter(trx, shop, theirs))).toBe('not-found');
		expect(await inShop((trx) => findMeter(trx, other, theirs), other)).toMatchObject(bench);
	});

	it('knows no meter by a made-up id', async () => {
		for (const id of [randomUUID(), 'none', '']) {
			expect(await inShop((trx) => findMeter(trx, shop, id))).toBeNull();
			expect(await inShop((trx) => editMeter(trx, shop, id, { ...bench, name: 'X' }))).toBe('not-found');
			expect(await inShop((trx) => removeMeter(trx, shop, id))).toBe('not-found');
		}
	});

	it('takes no meter without a range', async () => {
		await expect(inShop((trx) => addMeter(trx, shop, { name: 'None', ranges: [] }))).rejects.toThrow();
	});
});
