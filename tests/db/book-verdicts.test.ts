import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { wholeBook, type BookSort } from '../../src/lib/book-filter.ts';
import { listBook } from '../../src/lib/server/db/book.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { addReading, strikeReading, type ReadingInput } from '../../src/lib/server/db/readings.ts';
import { findRun } from '../../src/lib/server/db/runs.ts';
import { addSpec } from '../../src/lib/server/db/specs.ts';
import { addSpool } from '../../src/lib/server/db/spools.ts';
import { expectedCoil } from '../../src/lib/spec/judged.ts';
import { startingSpec } from '../../src/lib/spec/start.ts';
import { measuredOf } from '../../src/routes/(workshop)/book/[run]/measured.server.ts';
import { verdictsOf } from '../../src/routes/(workshop)/book/verdicts.server.ts';
import { parseFind } from '../../src/routes/(workshop)/book/find.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let shop: string;
let winderId: string;
let specId: string;
let spoolId: string;

const content = startingSpec('two-coils', 'Evening bridge');
const turns = 5_000;
/** This spool is 3 % above what its size says. */
const truth = (wound: number): number => {
	const expected = expectedCoil(content, wound);
	if (!expected.ok) throw new Error(expected.field);
	return 1.03 * expected.value.ohm;
};

let hour = 0;
async function wind(part: { name?: string; spec?: boolean; spool?: boolean; onBobbin?: number } = {}): Promise<string> {
	const { name = 'Screw coil', spec = true, spool = spec, onBobbin = turns } = part;
	const at = new Date(Date.UTC(2026, 11, 2, hour++)).toISOString();
	const plan = { target: turns, look_every: 500, direction: 'counter-clockwise' as const };
	const from = {
		spec_id: spec ? specId : null,
		spec_revision_no: spec ? 1 : null,
		spec_coil: spec ? 0 : null,
		spool_id: spool ? spoolId : null
	};
	const coilId = randomUUID();
	await db.owner
		.insertInto('coil')
		.values({ workshop_id: shop, id: coilId, name, ...plan, ...from, place: hour, state: 'wound' })
		.execute();
	const row = await db.owner
		.insertInto('run')
		.values({
			workshop_id: shop,
			coil_id: coilId,
			winder_id: winderId,
			coil_name: name,
			...plan,
			...from,
			top_faces: 'out',
			tolerance_turns: 5,
			state: 'kept',
			taken_at: at,
			started_at: at,
			ended_at: at,
			sticker: `S${hour}`,
			turns: onBobbin,
			on_bobbin: onBobbin
		})
		.returning('id')
		.executeTakeFirstOrThrow();
	return row.id;
}

const inShop = <T>(work: Parameters<typeof inWorkshop<T>>[2]) => inWorkshop<T>(db.app, shop, work);
async function read(runId: string, value: number | null, part: Partial<ReadingInput> = {}): Promise<string> {
	const id = randomUUID();
	const reading: ReadingInput & { id: string; by: null } = {
		kind: 'resistance',
		stage: 'wound',
		value,
		temperatureC: 20,
		temperatureHalfWidthC: 0.5,
		meterId: null,
		meterRange: null,
		halfWidth: 5,
		note: '',
		...part,
		id,
		by: null
	};
	const added = await inShop((trx) => addReading(trx, shop, runId, reading));
	if (!added.ok) throw new Error(added.why);
	return id;
}
const book = (sort: BookSort = 'when', descending = false, find = '') =>
	inShop(async (trx) => {
		const filter = { ...wholeBook, terms: parseFind(find) };
		const lines = await listBook(trx, shop, 'UTC', filter, { sort, descending, offset: 0, limit: 50 });
		const verdicts = await verdictsOf(trx, shop, lines);
		return lines.map((line, i) => ({ ...line, ...verdicts[i]! }));
	});
const measured = (runId: string) => inShop(async (trx) => measuredOf(trx, shop, (await findRun(trx, shop, runId))!));

const runs: Record<'first' | 'second' | 'open' | 'short' | 'plain' | 'unread', string> = {
	first: '',
	second: '',
	open: '',
	short: '',
	plain: '',
	unread: ''
};

beforeAll(async () => {
	db = await freshDatabase();
	const workshop = await db.owner
		.insertInto('workshop')
		.values({ short_name: 'hollow-lane', name: 'Hollow Lane workshop', time_zone: 'UTC' })
		.returning('id')
		.executeTakeFirstOrThrow();
	shop = workshop.id;
	const winder = await db.owner
		.insertInto('winder')
		.values({ workshop_id: shop, name: 'w-01' })
		.returning('id')
		.executeTakeFirstOrThrow();
	winderId = winder.id;
	specId = await inShop((trx) => addSpec(trx, shop, content, null));
	const spool = await inShop((trx) =>
		addSpool(trx, shop, { name: 'Red reel', lot: '', wire: content.wire, note: '' }, null)
	);
	if (!spool.ok) throw new Error(spool.why);
	spoolId = spool.id;
	for (const name of Object.keys(runs) as (keyof typeof runs)[]) {
		runs[name] = await wind({ name, spec: name !== 'plain' });
	}
	await read(runs.first, truth(turns));
	await read(runs.second, 1.001 * truth(turns));
	await read(runs.open, null);
	await read(runs.short, 0.3);
	await read(runs.plain, 7_000, { temperatureC: 45 });
});
afterAll(() => db.drop());

const line = async (name: keyof typeof runs) => (await book()).find(({ id }) => id === runs[name])!;

describe('a line of the book', () => {
	it('shows the newest resistance at 20 °C that was not struck out', async () => {
		const run = await wind({ name: 'read twice', spec: false });
		await read(run, 7_000);
		await read(run, 8_000);
		const wrong = await read(run, 1);
		await read(run, 0.02, { kind: 'outer-width', temperatureC: null, halfWidth: 0.0001 });
		await inShop((trx) => strikeReading(trx, shop, run, wrong, null));
		expect((await book()).find(({ id }) => id === run)?.measured?.ohm).toBe(8_000);
		// 7,000 Ω at 45 °C are 6,373 Ω at 20 °C by 0.00393 per kelvin (IEC 60028).
		expect((await line('plain')).measured?.ohm).toBeCloseTo(6_373.8, 1);
	});

	it('has the verdict of the run’s own page, calibrated with the others and never with itself', async () => {
		for (const name of ['first', 'second', 'open', 'short', 'unread'] as const) {
			const page = await measured(runs[name]);
			const shown = await line(name);
			expect(shown.predicted).toEqual({ ohm: page.expected!.ohm, uncertaintyOhm: page.expected!.uncertaintyOhm });
			expect(shown.agreement).toBe(page.readings[0]?.verdict?.agreement ?? null);
			expect(page.calibration?.used.map(({ runId }) => runId)).not.toContain(runs[name]);
		}
		expect((await line('first')).agreement).toBe('within');
		expect((await line('open')).agreement).toBe('open');
		expect((await line('short')).agreement).toBe('short');
		expect((await line('unread')).agreement).toBeNull();
	});

	it('says nothing of a coil without a spec, and without a spool only what the model says', async () => {
		expect(await line('plain')).toMatchObject({ spec: null, predicted: null, agreement: null });
		const run = await wind({ spool: false });
		const page = await measured(run);
		expect(page.calibration).toBeNull();
		expect((await book()).find(({ id }) => id === run)?.predicted?.ohm).toBe(page.expected?.ohm);
	});

	it('is found by the name of its spec and sorted by what was measured', async () => {
		expect((await book('when', false, 'evening')).every(({ spec }) => spec?.name === 'Evening bridge')).toBe(true);
		const ids = (await book('measured', true)).map(({ id }) => id);
		expect(ids[0]).toBe(runs.open);
		const read = (await book('measured', false)).filter(({ measured: at }) => at !== null);
		expect(read[0]?.id).toBe(runs.short);
		expect(read.at(-1)?.id).toBe(runs.open);
	});
});

describe('what a run’s page says', () => {
	it('narrows what is expected with the kept coils of its bobbin and spool', async () => {
		const { expected, plain, calibration, leftOut } = await measured(runs.unread);
		expect(calibration?.used.map(({ runId }) => runId).sort()).toEqual([runs.first, runs.second].sort());
		expect(leftOut.map(({ runId }) => runId).sort()).toEqual([runs.open, runs.short].sort());
		expect(calibration?.scale).toBeGreaterThan(1.02);
		expect(expected!.uncertaintyOhm).toBeLessThan(plain!.uncertaintyOhm);
		expect(Math.abs(expected!.ohm - truth(turns))).toBeLessThan(0.01 * truth(turns));
	});

	it('says of a coil far from the rest that it teaches them nothing, and the lines of the book agree', async () => {
		const [plenty, shorted] = [await wind({ name: 'plenty' }), await wind({ name: 'shorted' })];
		await read(plenty, 0.999 * truth(turns));
		await read(shorted, 0.8 * truth(turns));
		const page = await measured(shorted);
		expect(page.teachesNot).toBe('far-from-rest');
		expect(page.calibration?.used).toHaveLength(3);
		expect((await measured(plenty)).teachesNot).toBeNull();
		const { leftOut } = await measured(runs.unread);
		expect(leftOut).toContainEqual(expect.objectContaining({ runId: shorted, why: 'far-from-rest' }));
		for (const [id, agreement] of [
			[plenty, 'within'],
			[shorted, 'below']
		] as const) {
			const { expected } = await measured(id);
			const shown = (await book()).find((one) => one.id === id)!;
			expect(shown.predicted).toEqual({ ohm: expected!.ohm, uncertaintyOhm: expected!.uncertaintyOhm });
			expect(shown.agreement).toBe(agreement);
		}
	});

	it('expects of coils without a spool what their own turns come to', async () => {
		const [one, other] = [await wind({ spool: false }), await wind({ spool: false, onBobbin: turns + 3 })];
		const lines = await book();
		const of = (id: string) => lines.find((line) => line.id === id)?.predicted;
		for (const id of [one, other]) {
			const { expected } = await measured(id);
			expect(of(id)).toEqual({ ohm: expected!.ohm, uncertaintyOhm: expected!.uncertaintyOhm });
		}
		expect(of(other)!.ohm).toBeGreaterThan(of(one)!.ohm);
	});

	it('says what a width and an inductance mean', async () => {
		const run = await wind();
		const before = await measured(run);
		await read(run, before.outerWidthM!.value, { kind: 'outer-width', halfWidth: 0.0001, temperatureC: null });
		await read(run, 1.5 * before.inductanceH!.value, { kind: 'inductance', halfWidth: 0.01, temperatureC: null });
		const { readings } = await measured(run);
		const width = readings.find(({ kind }) => kind === 'outer-width')!;
		expect(width.means).toBeCloseTo(content.packing.value, 6);
		expect(width.side?.agreement).toBe('within');
		const henries = readings.find(({ kind }) => kind === 'inductance')!;
		expect(henries.means).toBeCloseTo(1.5 * content.cores.effectivePermeability, 6);
		expect(henries.side?.agreement).toBe('above');
	});

	it('offers nothing of a coil with no turn on it', async () => {
		const page = await measured(await wind({ onBobbin: 0 }));
		expect(page).toMatchObject({ expected: null, calibration: null, outerWidthM: null });
		expect(page.spec?.no).toBe(1);
	});
});
