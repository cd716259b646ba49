import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { addMeter, editMeter, removeMeter } from '../../src/lib/server/db/meters.ts';
import {
	addReading,
	listReadings,
	neighboursOf,
	readingsMax,
	strikeReading,
	type ReadingInput
} from '../../src/lib/server/db/readings.ts';
import { startingSpec } from '../../src/lib/spec/start.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let shop: Shop;
let other: Shop;

interface Shop {
	id: string;
	ada: string;
	bo: string;
	winderId: string;
	specId: string;
	meterId: string;
}

const range = { upToOhm: 20_000, percent: 0.8, counts: 2, ohmPerCount: 10 };

async function makeShop(shortName: string): Promise<Shop> {
	const { id } = await db.owner
		.insertInto('workshop')
		.values({ short_name: shortName, name: shortName, time_zone: 'UTC' })
		.returning('id')
		.executeTakeFirstOrThrow();
	const person = async (name: string) =>
		(
			await db.owner
				.insertInto('member')
				.values({ workshop_id: id, email: `${name.toLowerCase()}@${shortName}.example`, name, role: 'maker' })
				.returning('id')
				.executeTakeFirstOrThrow()
		).id;
	const winder = await db.owner
		.insertInto('winder')
		.values({ workshop_id: id, name: 'w-01' })
		.returning('id')
		.executeTakeFirstOrThrow();
	const content = startingSpec('two-coils', 'Evening bridge');
	const specId = randomUUID();
	await db.owner.insertInto('spec').values({ workshop_id: id, id: specId }).execute();
	for (const no of [1, 2]) {
		await db.owner
			.insertInto('spec_revision')
			.values({ workshop_id: id, spec_id: specId, no, name: content.name, content: JSON.stringify(content) })
			.execute();
	}
	const meter = await inWorkshop(db.app, id, (trx) => addMeter(trx, id, { name: 'Bench meter', ranges: [range] }));
	if (!meter.ok) throw new Error(meter.why);
	return { id, ada: await person('Ada'), bo: await person('Bo'), winderId: winder.id, specId, meterId: meter.id };
}

async function wind(
	at: Shop,
	part: { state?: 'kept' | 'set-aside' | 'open'; no?: number; endedAt?: string } = {}
): Promise<string> {
	const { state = 'kept', no = 1, endedAt = '2026-12-02T10:00:00Z' } = part;
	const plan = { target: 5000, look_every: 500, direction: 'counter-clockwise' as const };
	const spec = { spec_id: at.specId, spec_revision_no: no, spec_coil: 0 };
	const coilId = randomUUID();
	await db.owner
		.insertInto('coil')
		.values({ workshop_id: at.id, id: coilId, name: 'Screw coil', ...plan, ...spec, place: 1, state: 'wound' })
		.execute();
	const open = state === 'open';
	const row = await db.owner
		.insertInto('run')
		.values({
			workshop_id: at.id,
			coil_id: coilId,
			winder_id: at.winderId,
			coil_name: 'Screw coil',
			...plan,
			...spec,
			top_faces: 'out',
			tolerance_turns: 5,
			state,
			taken_at: endedAt,
			started_at: endedAt,
			ended_at: open ? null : endedAt,
			sticker: open ? null : randomUUID().slice(0, 8),
			turns: open ? null : 5000,
			on_bobbin: open ? null : 5000
		})
		.returning('id')
		.executeTakeFirstOrThrow();
	return row.id;
}

const ohms = (value: number | null, part: Partial<ReadingInput> = {}): ReadingInput => ({
	kind: 'resistance',
	stage: 'wound',
	value,
	temperatureC: 21,
	temperatureHalfWidthC: 1,
	meterId: null,
	meterRange: null,
	halfWidth: 20,
	note: '',
	...part
});
const inShop = <T>(work: Parameters<typeof inWorkshop<T>>[2], at = shop) => inWorkshop<T>(db.app, at.id, work);
const add = (runId: string, reading: ReadingInput, id: string = randomUUID(), at = shop) =>
	inShop((trx) => addReading(trx, at.id, runId, { ...reading, id, by: at.ada }), at);
const list = (runId: string) => inShop((trx) => listReadings(trx, shop.id, runId));

beforeAll(async () => {
	db = await freshDatabase();
	shop = await makeShop('hollow-lane');
	other = await makeShop('mill-yard');
});
afterAll(() => db.drop());

describe('readings of a run', () => {
	it('come back as they were taken, with who took them, the newest first', async () => {
		const run = await wind(shop);
		const first = ohms(4012, { meterId: shop.meterId, meterRange: range, halfWidth: null, note: 'cold' });
		await add(run, first);
		await add(run, ohms(null, { stage: 'leads' }));
		const [second, before] = await list(run);
		expect(before).toMatchObject({
			...first,
			runId: run,
			meterName: 'Bench meter',
			takenByName: 'Ada',
			struckAt: null
		});
		expect(second).toMatchObject({ value: null, stage: 'leads', meterName: '' });
	});

	it('are one when the same form comes in twice, even at one moment', async () => {
		const run = await wind(shop);
		const id = randomUUID();
		const answers = await Promise.all([add(run, ohms(4012), id), add(run, ohms(4012), id)]);
		expect(answers.map((answer) => answer.ok && answer.made).sort()).toEqual(['before', 'new']);
		expect(await add(run, ohms(9999), id)).toEqual({ ok: true, made: 'before' });
		expect((await list(run)).map(({ value }) => value)).toEqual([4012]);
		expect(await add(await wind(shop), ohms(4012), id)).toEqual({ ok: false, why: 'not-found' });
	});

	it('belong to coils off the bench, set aside ones too', async () => {
		expect(await add(await wind(shop, { state: 'open' }), ohms(4012))).toEqual({ ok: false, why: 'open' });
		expect(await add(await wind(shop, { state: 'set-aside' }), ohms(null))).toEqual({ ok: true, made: 'new' });
	});

	it('keep the range they were read on whatever becomes of the meter', async () => {
		const run = await wind(shop);
		const { id: meterId } = (await inShop((trx) => addMeter(trx, shop.id, { name: 'Lent', ranges: [range] }))) as {
			id: string;
		};
		const reading = ohms(4012, { meterId, meterRange: range, halfWidth: null });
		await add(run, reading);
		await inShop((trx) => editMeter(trx, shop.id, meterId, { name: 'Given back', ranges: [{ ...range, percent: 5 }] }));
		await inShop((trx) => removeMeter(trx, shop.id, meterId));
		expect((await list(run))[0]).toMatchObject({ meterName: 'Lent', meterRange: range });
		expect(await add(run, reading)).toEqual({ ok: false, why: 'meter-gone' });
		const theirs = { ...reading, meterId: other.meterId };
		expect(await add(run, theirs)).toEqual({ ok: false, why: 'meter-gone' });
	});

	it('are struck out with who and when, never deleted, and only once', async () => {
		const run = await wind(shop);
		const id = randomUUID();
		await add(run, ohms(4012), id);
		const strike = (by: string) => inShop((trx) => strikeReading(trx, shop.id, run, id, by));
		expect(await strike(shop.bo)).toBe('ok');
		const [struck] = await list(run);
		expect(struck).toMatchObject({ value: 4012, struckByName: 'Bo' });
		expect(await strike(shop.ada)).toBe('ok');
		expect((await list(run))[0]).toEqual(struck);
	});

	it('of another workshop, another run or a made-up id are not found', async () => {
		const [run, theirs] = [await wind(shop), await wind(other)];
		const id = randomUUID();
		await add(theirs, ohms(4012), id, other);
		expect(await list(theirs)).toEqual([]);
		expect(await add(theirs, ohms(1))).toEqual({ ok: false, why: 'not-found' });
		for (const runId of [theirs, run, randomUUID(), 'none']) {
			expect(await inShop((trx) => strikeReading(trx, shop.id, runId, id, shop.ada))).toBe('not-found');
		}
		expect(await add('none', ohms(1))).toEqual({ ok: false, why: 'not-found' });
		expect(await add(run, ohms(1), 'none')).toEqual({ ok: false, why: 'not-found' });
	});

	it('are not without number', async () => {
		const run = await wind(shop);
		await db.owner
			.insertInto('reading')
			.values(
				Array.from({ length: readingsMax }, () => ({
					workshop_id: shop.id,
					run_id: run,
					kind: 'resistance' as const,
					stage: 'wound' as const,
					value: 1,
					temperature_c: 20
				}))
			)
			.execute();
		expect(await add(run, ohms(4012))).toEqual({ ok: false, why: 'too-many' });
	});
});

describe('coils to compare with', () => {
	it('are those of the same revision read with the same meter on the same range, the nearest in time first', async () => {
		const meter = { id: shop.meterId, range };
		const with_ = { meterId: meter.id, meterRange: range, halfWidth: null };
		const at = (hour: string) => `2027-01-05T${hour}:00:00Z`;
		const wound = (part = {}) => wind(shop, { no: 2, endedAt: at('10'), ...part });
		const run = await wound();
		const far = await wound({ endedAt: at('18') });
		const near = await wound({ endedAt: at('11') });
		await add(far, ohms(4100, with_));
		await add(near, ohms(4050, with_));
		await add(near, ohms(4060, with_));
		const wrong = randomUUID();
		await add(near, ohms(9, with_), wrong);
		await inShop((trx) => strikeReading(trx, shop.id, near, wrong, shop.ada));
		// A newer one with another meter does not hide the one that compares.
		await add(near, ohms(4222));
		await add(await wound(), ohms(4000));
		await add(await wound(), ohms(4000, { ...with_, meterRange: { ...range, percent: 1 } }));
		await add(await wound(), ohms(null, with_));
		await add(await wound({ state: 'set-aside' }), ohms(4000, with_));
		await add(await wound({ no: 1 }), ohms(4000, with_));
		const asked = { id: run, spec: { id: shop.specId, no: 2 }, endedAt: new Date(at('10')) };
		const found = await inShop((trx) => neighboursOf(trx, shop.id, asked, meter, 3));
		expect(found.map(({ runId, ohm }) => ({ runId, ohm }))).toEqual([
			{ runId: near, ohm: 4060 },
			{ runId: far, ohm: 4100 }
		]);
		expect(await inShop((trx) => neighboursOf(trx, shop.id, asked, meter, 1))).toHaveLength(1);
	});
});
