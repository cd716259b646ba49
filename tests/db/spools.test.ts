import { randomUUID } from 'node:crypto';
import type { Transaction } from 'kysely';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { takeNextCoil } from '../../src/lib/server/db/coils.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import type { Database } from '../../src/lib/server/db/schema.ts';
import { addSpec, windSpec } from '../../src/lib/server/db/specs.ts';
import {
	addSpool,
	editSpool,
	endSpool,
	findSpool,
	listSpools,
	type SpoolInput
} from '../../src/lib/server/db/spools.ts';
import { startingSpec, tableWire } from '../../src/lib/spec/start.ts';
import { makeShop, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let shop: Shop;
let other: Shop;

beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db.drop());
beforeEach(async () => {
	shop = await makeShop(db);
	other = await makeShop(db);
});

const here = <T>(work: (trx: Transaction<Database>) => Promise<T>) => inWorkshop(db.app, shop.id, work);
const there = <T>(work: (trx: Transaction<Database>) => Promise<T>) => inWorkshop(db.app, other.id, work);

const reel = (more: Partial<SpoolInput> = {}): SpoolInput => ({
	name: 'Red reel',
	lot: 'L 17',
	wire: { ...tableWire('awg-42', 'heavy'), ohmPerM: 5.31 },
	note: 'From the spring order.',
	...more
});
const add = (more: Partial<SpoolInput> = {}) => here((trx) => addSpool(trx, shop.id, reel(more), shop.ada));
const added = async (more: Partial<SpoolInput> = {}) => {
	const done = await add(more);
	if (!done.ok) throw new Error(done.why);
	return done.id;
};
const find = (id: string) => here((trx) => findSpool(trx, shop.id, id));
const edit = (id: string, more: Partial<SpoolInput>) => here((trx) => editSpool(trx, shop.id, id, reel(more)));
const end = (id: string, ended: boolean) => here((trx) => endSpool(trx, shop.id, id, ended));

describe('a spool', () => {
	it('comes back as it was written, and as it was changed', async () => {
		const id = await added();
		expect(await find(id)).toMatchObject({ ...reel(), id, endedAt: null, coils: 0 });
		expect(await edit(id, { lot: '', wire: tableWire('mm-0.063', 'grade 1') })).toBe('ok');
		expect(await find(id)).toMatchObject(reel({ lot: '', wire: tableWire('mm-0.063', 'grade 1') }));
	});

	it('bears a name no other on the shelf has, whatever its case', async () => {
		const id = await added();
		expect(await add({ name: 'RED REEL' })).toEqual({ ok: false, why: 'name-taken' });
		const second = await added({ name: 'Green reel' });
		expect(await edit(second, { name: 'red reel' })).toBe('name-taken');
		expect((await find(second))?.name).toBe('Green reel');
		expect(await edit(id, { name: 'RED reel' })).toBe('ok');
	});

	it('of two with one name at the same moment the second is told', async () => {
		const both = await Promise.all([add(), add()]);
		expect(both.filter((one) => one.ok)).toHaveLength(1);
		const green = await added({ name: 'Green reel' });
		const blue = await added({ name: 'Blue reel' });
		const renamed = await Promise.all([edit(green, { name: 'Copper' }), edit(blue, { name: 'copper' })]);
		expect(renamed.sort()).toEqual(['name-taken', 'ok']);
	});

	it('that ended frees its name, and comes back only when that is still free', async () => {
		const old = await added();
		expect(await end(old, true)).toBe('ok');
		expect((await find(old))?.endedAt).toBeInstanceOf(Date);
		expect(await end(old, true)).toBe('ok');
		const next = await added();
		expect(await end(old, false)).toBe('name-taken');
		expect(await edit(old, { note: 'Ran out in March.' })).toBe('ok');
		expect(await end(next, true)).toBe('ok');
		expect(await end(old, false)).toBe('ok');
		expect((await find(old))?.endedAt).toBeNull();
	});

	it('counts the kept runs wound from it', async () => {
		const id = await added();
		await here(async (trx) => {
			const specId = await addSpec(trx, shop.id, startingSpec('two-coils', 'Evening bridge'), shop.ada);
			await windSpec(trx, shop.id, { specId, no: 1, pickups: 2, spoolId: id, by: shop.ada });
			for (const state of ['kept', 'kept', 'set-aside', 'open'] as const) {
				const taken = await takeNextCoil(trx, shop.id, shop.winderId, new Date());
				await trx.updateTable('run').set({ state }).where('id', '=', taken!.runId).execute();
			}
		});
		expect((await find(id))?.coils).toBe(2);
		expect((await here((trx) => listSpools(trx, shop.id)))[0]?.coils).toBe(2);
	});

	it('of another workshop, unknown, or no id at all is not found', async () => {
		const id = await added();
		for (const each of [id, randomUUID(), 'no-id']) {
			expect(await there((trx) => findSpool(trx, other.id, each))).toBeNull();
			expect(await there((trx) => editSpool(trx, other.id, each, reel({ name: 'Theirs' })))).toBe('not-found');
			expect(await there((trx) => endSpool(trx, other.id, each, true))).toBe('not-found');
		}
		expect(await there((trx) => listSpools(trx, other.id))).toEqual([]);
		expect(await find(id)).toMatchObject({ name: 'Red reel', endedAt: null });
		expect(await there((trx) => addSpool(trx, other.id, reel(), null))).toMatchObject({ ok: true });
	});
});

describe('the list of spools', () => {
	it('has those on the shelf by name, and those that ended apart', async () => {
		await added({ name: 'b reel' });
		await added({ name: 'A reel' });
		const ended = await added({ name: 'C reel' });
		await end(ended, true);
		expect((await here((trx) => listSpools(trx, shop.id))).map(({ name }) => name)).toEqual(['A reel', 'b reel']);
		const gone = await here((trx) => listSpools(trx, shop.id, { ended: true }));
		expect(gone.map(({ name }) => name)).toEqual(['C reel']);
	});
});
