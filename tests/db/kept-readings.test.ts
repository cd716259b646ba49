import { randomUUID } from 'node:crypto';
import type { Insertable, Transaction } from 'kysely';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { readingTo20C } from '../../src/lib/coil/measurement.ts';
import { takeNextCoil } from '../../src/lib/server/db/coils.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import type { Database, ReadingTable } from '../../src/lib/server/db/schema.ts';
import { addSpec, keptReadings, keptReadingsMax, windSpec } from '../../src/lib/server/db/specs.ts';
import { addSpool } from '../../src/lib/server/db/spools.ts';
import type { SpecContent } from '../../src/lib/spec/content.ts';
import { calibrationOf } from '../../src/lib/spec/kept.ts';
import { startingSpec } from '../../src/lib/spec/start.ts';
import { makeShop, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let shop: Shop;
let spoolId: string;

beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db.drop());
beforeEach(async () => {
	shop = await makeShop(db);
	spoolId = await reel('Red reel');
});

const here = <T>(work: (trx: Transaction<Database>) => Promise<T>) => inWorkshop(db.app, shop.id, work);

const content = startingSpec('two-coils', 'Evening bridge');
const range = { upToOhm: 20_000, percent: 0.5, counts: 2, ohmPerCount: 10 };
const start = Date.UTC(2026, 2, 2, 9);

const reel = (name: string) =>
	here(async (trx) => {
		const added = await addSpool(trx, shop.id, { name, lot: '', wire: content.wire, note: '' }, null);
		if (!added.ok) throw new Error(added.why);
		return added.id;
	});

let hour = 0;
/** Winds all coils of a spec and closes their runs, an hour apart. Ids of the runs. */
const wound = (of: SpecContent, spool: string | null = spoolId, state: 'kept' | 'set-aside' = 'kept') =>
	here(async (trx) => {
		const specId = await addSpec(trx, shop.id, of, shop.ada);
		const queued = await windSpec(trx, shop.id, { specId, no: 1, pickups: 1, spoolId: spool, by: shop.ada });
		if (!queued.ok) throw new Error(queued.why);
		const runIds: string[] = [];
		for (const coil of queued.coils) {
			const taken = await takeNextCoil(trx, shop.id, shop.winderId, new Date(start));
			const ended_at = new Date(start + (hour += 1) * 3_600_000);
			await trx
				.updateTable('run')
				.set({ state, turns: coil.target, on_bobbin: coil.target, ended_at })
				.where('id', '=', taken!.runId)
				.execute();
			runIds.push(taken!.runId);
		}
		return runIds;
	});

let minute = 0;
const read = (runId: string, more: Partial<Insertable<ReadingTable>>) =>
	here((trx) =>
		trx
			.insertInto('reading')
			.values({
				workshop_id: shop.id,
				run_id: runId,
				kind: 'resistance',
				stage: 'wound',
				value: 3700,
				temperature_c: 24,
				temperature_half_width_c: 1,
				meter_range: JSON.stringify(range),
				taken_at: new Date(start + (minute += 1) * 60_000),
				...more
			})
			.execute()
	);

const kept = (more: { bobbinName?: string; spoolId?: string | null } = {}) =>
	here((trx) => keptReadings(trx, shop.id, { bobbinName: content.bobbin.name, spoolId, ...more }));

describe('kept coils to learn from', () => {
	it('are those of the bobbin and the spool, the last first, with the reading brought to 20 °C', async () => {
		const [screw = '', slug = ''] = await wound(content);
		await read(screw, {});
		const list = await kept();
		expect(list.map(({ runId }) => runId)).toEqual([slug, screw]);
		const at20C = readingTo20C(3700, 24, 1, range);
		if (!at20C.ok) throw new Error(at20C.field);
		expect(list[1]).toMatchObject({
			name: 'Evening bridge · Screw coil',
			turns: content.coils[0]!.turns,
			specRevisionNo: 1,
			bobbin: { name: content.bobbin.name, straightM: content.bobbin.straightM },
			ohmAt20C: at20C.value.ohm,
			uncertaintyOhm: at20C.value.uncertaintyOhm,
			meterOhm: at20C.value.meterOhm,
			open: false,
			outerWidthM: null,
			inductanceH: null
		});
		expect(list[1]!.sticker).toMatch(/^[2-9A-Z]{4}$/);
		expect(list[0]).toMatchObject({ ohmAt20C: null, open: false });
	});

	it('are known by the bobbin’s name, whatever the case and the spaces around it', async () => {
		const own = { ...content, bobbin: { ...content.bobbin, name: 'Maple Form ' } };
		await wound(own);
		expect(await kept({ bobbinName: ' maple form' })).toHaveLength(2);
		expect(await kept({ bobbinName: 'maple' })).toEqual([]);
	});

	it('are none of another spool, of no spool, set aside or still open', async () => {
		const green = await reel('Green reel');
		await wound(content, green);
		await wound(content, null);
		await wound(content, spoolId, 'set-aside');
		expect(await kept()).toEqual([]);
		expect(await kept({ spoolId: null })).toEqual([]);
		expect(await kept({ spoolId: 'no-id' })).toEqual([]);
		expect(await kept({ spoolId: green })).toHaveLength(2);
	});

	it('are not another workshop’s, even by its own spool', async () => {
		await wound(content);
		const mine = { id: shop.id, spool: spoolId };
		const other = await makeShop(db);
		const asked = inWorkshop(db.app, other.id, (trx) =>
			keptReadings(trx, other.id, { bobbinName: content.bobbin.name, spoolId: mine.spool })
		);
		expect(await asked).toEqual([]);
	});

	it('are the newest so many', async () => {
		const [screw = ''] = await wound(content);
		const row = await db.owner.selectFrom('run').selectAll().where('id', '=', screw).executeTakeFirstOrThrow();
		const later = Array.from({ length: keptReadingsMax }, (_, i) => ({
			...row,
			id: randomUUID(),
			sticker: null,
			looks: null,
			snaps: null,
			faults: null,
			ended_at: new Date(start + 9e9 + i)
		}));
		await db.owner.insertInto('run').values(later).execute();
		const list = await kept();
		expect(list).toHaveLength(keptReadingsMax);
		expect(list.map(({ runId }) => runId)).not.toContain(screw);
	});
});

describe('of readings', () => {
	const only = async () => {
		const list = await kept();
		return list.at(-1)!;
	};
	let screw: string;
	beforeEach(async () => {
		screw = (await wound(content))[0]!;
	});

	it('the newest that was not struck out counts, and those after assembly do not', async () => {
		await read(screw, { value: 3600 });
		await read(screw, { value: 3700, stage: 'tape', temperature_c: 20 });
		await read(screw, { value: 3800, struck_at: new Date(start) });
		await read(screw, { value: 7500, stage: 'assembled' });
		await read(screw, { value: 7500, stage: 'covered' });
		expect((await only()).ohmAt20C).toBe(3700);
	});

	it('one beyond every range of the meter is an open coil', async () => {
		await read(screw, { value: null });
		expect(await only()).toMatchObject({ ohmAt20C: null, open: true });
	});

	it('one of next to nothing is handed on, to be known for a short', async () => {
		await read(screw, { value: 0 });
		expect(await only()).toMatchObject({ ohmAt20C: 0, open: false });
		const said = calibrationOf(content, null, [await only()]);
		expect(said).toMatchObject({ calibration: null, leftOut: [{ runId: screw, why: 'open-or-short' }] });
	});

	it('one without a meter is worth what was typed, and a part of itself where nothing was', async () => {
		const bare = { meter_range: null, temperature_c: 20, temperature_half_width_c: 0 };
		await read(screw, { ...bare, half_width: 30 });
		// A rectangle of ±30 Ω: 30/√3 (JCGM 100, 4.3.7).
		expect((await only()).meterOhm).toBeCloseTo(17.3205, 4);
		await read(screw, { ...bare, half_width: null });
		// 1 % of 3700 Ω over √3.
		expect(await only()).toMatchObject({
			meterOhm: expect.closeTo(21.362, 3),
			uncertaintyOhm: expect.closeTo(21.362, 3)
		});
	});

	it('width counts before the tape, inductance but under a cover', async () => {
		const plain = { temperature_c: null, temperature_half_width_c: null, meter_range: null };
		await read(screw, { ...plain, kind: 'outer-width', value: 0.0142, half_width: 0.0002 });
		await read(screw, { ...plain, kind: 'outer-width', value: 0.0146, stage: 'tape' });
		await read(screw, { ...plain, kind: 'inductance', value: 1.9, stage: 'assembled' });
		await read(screw, { ...plain, kind: 'inductance', value: 1.7, stage: 'covered' });
		expect(await only()).toMatchObject({
			outerWidthM: 0.0142,
			outerWidthHalfWidthM: 0.0002,
			inductanceH: 1.9,
			ohmAt20C: null
		});
		await read(screw, { ...plain, kind: 'outer-width', value: 0.0143 });
		expect(await only()).toMatchObject({ outerWidthM: 0.0143, outerWidthHalfWidthM: 0.0001 });
	});

	it('what they teach is that the next coil measures the like', async () => {
		await read(screw, { value: 3700, temperature_c: 20 });
		const said = calibrationOf(content, content.wire, await kept());
		expect(said.used).toMatchObject([{ runId: screw, turns: 5000, ohmAt20C: 3700, share: 1 }]);
		expect(said.leftOut).toMatchObject([{ why: 'no-resistance' }]);
		expect(said.calibration?.scale).toBeGreaterThan(0.9);
	});
});
