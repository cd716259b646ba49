import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { takeNextCoil } from '../../src/lib/server/db/coils.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import {
	FactNumberTaken,
	findTap,
	readWinder,
	sweepLines,
	tracePointsMax,
	writeBatch,
	type LineRow,
	type NumberedFact,
	type WinderWrite,
	type RunChange
} from '../../src/lib/server/db/recorder.ts';
import type { RunFigures } from '../../src/lib/winding/types.ts';
import { makeShop, makeWinder, queueCoil, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let shop: Shop;
const at = Date.UTC(2026, 2, 2, 9);

beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db.drop());
beforeEach(async () => {
	shop = await makeShop(db);
});

const line = (n: number, more: Partial<LineRow> = {}): LineRow => ({
	b: '5C0E91A7',
	n,
	e: 0,
	k: null,
	f: n,
	v: 0,
	r: 600,
	t: n * 100,
	x: null,
	g: null,
	receivedAt: at + n * 100,
	...more
});
const fact = (no: number, more: Partial<NumberedFact> = {}): NumberedFact => ({
	no,
	kind: 'went-on',
	at,
	runId: null,
	turns: 4,
	detail: { mark: 500, note: null },
	memberId: null,
	tapId: null,
	...more
});
const write = (more: Partial<WinderWrite> = {}): WinderWrite => ({
	workshopId: shop.id,
	winderId: shop.winderId,
	lines: [],
	cursors: [],
	facts: [],
	changes: [],
	snapshot: null,
	...more
});
const cursor = (n: number, more = {}) => ({
	b: '5C0E91A7',
	n,
	e: 0,
	f: n,
	v: 0,
	t: n * 100,
	firstAt: at,
	lastAt: at + n,
	...more
});
const figures: RunFigures = {
	turns: 40,
	onBobbin: 38,
	windingMs: 4000,
	stoppedMs: 100,
	rpmMean: 570,
	rpmTop: 612,
	looks: [{ mark: 20, turns: 21, note: 'even' }],
	snaps: [],
	takenBack: 2,
	faults: ['bouncing']
};
const saved = () => inWorkshop(db.app, shop.id, (trx) => readWinder(trx, shop.id, shop.winderId));
const lineCount = async () =>
	(await db.owner.selectFrom('kept_line').select('n').where('winder_id', '=', shop.winderId).execute()).length;

async function takeRun(): Promise<{ runId: string; coilId: string }> {
	await queueCoil(db, shop.id, 'neck');
	const taken = await inWorkshop(db.app, shop.id, (trx) => takeNextCoil(trx, shop.id, shop.winderId, new Date(at)));
	if (!taken) throw new Error('nothing waits');
	return { runId: taken.runId, coilId: taken.plan.coilId };
}

describe('a batch', () => {
	it('brings back what it wrote', async () => {
		const state = { v: 1, boots: [] };
		await writeBatch(db.app, [
			write({ lines: [line(1)], cursors: [cursor(1)], facts: [fact(1)], snapshot: { state, factNo: 1, at } })
		]);
		expect(await saved()).toEqual({ state, factNo: 1, cursors: [cursor(1)], openRuns: [] });
		const facts = await db.owner.selectFrom('fact').selectAll().where('winder_id', '=', shop.winderId).execute();
		expect(facts).toMatchObject([{ no: 1, kind: 'went-on', turns: 4, detail: { mark: 500, note: null } }]);
	});

	it('keeps the first of two lines with one number, and of two events with one', async () => {
		await writeBatch(db.app, [write({ lines: [line(1, { f: 7 }), line(2, { k: 'go', e: 1 })] })]);
		await writeBatch(db.app, [write({ lines: [line(1, { f: 9 }), line(3, { k: 'stop', e: 1 }), line(4)] })]);
		const lines = await db.owner
			.selectFrom('kept_line')
			.select(['n', 'f', 'k'])
			.where('winder_id', '=', shop.winderId)
			.orderBy('n')
			.execute();
		expect(lines).toEqual([
			{ n: 1, f: 7, k: null },
			{ n: 2, f: 2, k: 'go' },
			{ n: 4, f: 4, k: null }
		]);
	});

	it('never lowers a cursor', async () => {
		await writeBatch(db.app, [write({ cursors: [cursor(9, { e: 3 })] })]);
		await writeBatch(db.app, [write({ cursors: [cursor(4, { e: 4 })] })]);
		expect((await saved()).cursors).toEqual([cursor(9, { e: 4 })]);
	});

	it('is written as a whole or not at all, over all its workshops', async () => {
		const other = await makeShop(db);
		const good = write({ lines: [line(1)], facts: [fact(1)] });
		const bad = write({ workshopId: other.id, winderId: other.winderId, facts: [fact(1, { memberId: randomUUID() })] });
		await expect(writeBatch(db.app, [good, bad])).rejects.toMatchObject({ code: '23503' });
		expect(await lineCount()).toBe(0);
	});

	it('written twice, as after a connection that broke at the commit, is there once', async () => {
		const { runId, coilId } = await takeRun();
		const back = { kind: 'put-back', runId, coilId } as const;
		const batch = [write({ lines: [line(1)], cursors: [cursor(1)], facts: [fact(1, { runId })], changes: [back] })];
		await writeBatch(db.app, batch);
		// Meanwhile another bench took the coil.
		const second = await makeWinder(db, shop.id, 'w-02');
		await inWorkshop(db.app, shop.id, (trx) => takeNextCoil(trx, shop.id, second.winderId, new Date(at)));
		await writeBatch(db.app, batch);
		const coil = await db.owner.selectFrom('coil').selectAll().where('id', '=', coilId).executeTakeFirstOrThrow();
		expect(coil).toMatchObject({ state: 'on-bench', winder_id: second.winderId });
		expect(await lineCount()).toBe(1);
	});

	it('with a fact under the number of another is refused as a whole', async () => {
		const first = fact(1, { tapId: randomUUID() });
		await writeBatch(db.app, [write({ facts: [first] })]);
		await writeBatch(db.app, [write({ facts: [first, fact(2)] })]);
		for (const other of [{ kind: 'kept' as const }, { turns: 5 }, { detail: { mark: 501 } }, { at: at + 1 }]) {
			const clash = write({ lines: [line(1)], facts: [fact(3), { ...first, ...other }] });
			await expect(writeBatch(db.app, [clash])).rejects.toBeInstanceOf(FactNumberTaken);
		}
		await expect(writeBatch(db.app, [write({ facts: [fact(3), fact(3, { turns: 9 })] })])).rejects.toThrow('Fact 3');
		expect(await lineCount()).toBe(0);
		expect((await saved()).factNo).toBe(2);
	});

	it('cannot write into another workshop than it names', async () => {
		const other = await makeShop(db);
		await expect(writeBatch(db.app, [write({ winderId: other.winderId, lines: [line(1)] })])).rejects.toMatchObject({
			code: '23503'
		});
	});
});

describe('a run', () => {
	it('is closed with its figures and its trace, and opened again without them', async () => {
		const { runId, coilId } = await takeRun();
		const lines = Array.from({ length: 60 }, (_, i) => line(i + 1));
		const stretch = { b: '5C0E91A7', sign: 1, fromSum: 10, fromNet: 10, toSum: 50, fromTurns: 0 } as const;
		const closed = {
			kind: 'closed' as const,
			runId,
			coilId,
			state: 'kept' as const,
			reason: null,
			startedAt: at + 1000,
			endedAt: at + 5000,
			endedBy: shop.ada,
			figures,
			trace: [{ ...stretch, startT: 1000, endT: 5000 }]
		} satisfies RunChange;
		await writeBatch(db.app, [write({ lines, changes: [{ kind: 'started', runId, at: at + 900 }, closed] })]);
		const row = () => db.owner.selectFrom('run').selectAll().where('id', '=', runId).executeTakeFirstOrThrow();
		expect(await row()).toMatchObject({
			state: 'kept',
			turns: 40,
			on_bobbin: 38,
			looks: figures.looks,
			faults: ['bouncing'],
			started_at: new Date(at + 1000)
		});
		const trace = await db.owner
			.selectFrom('run_trace')
			.selectAll()
			.where('run_id', '=', runId)
			.executeTakeFirstOrThrow();
		expect(trace.at_ms).toHaveLength(41);
		expect([trace.at_ms[0], trace.turns[0], trace.rpm[0]]).toEqual([0, 0, 600]);
		expect([trace.at_ms.at(-1), trace.turns.at(-1)]).toEqual([4000, 40]);

		await writeBatch(db.app, [write({ changes: [{ kind: 'reopened', runId, coilId, winderId: shop.winderId }] })]);
		expect(await row()).toMatchObject({ state: 'open', turns: null, looks: null, ended_at: null });
		expect(await db.owner.selectFrom('run_trace').selectAll().where('run_id', '=', runId).execute()).toEqual([]);
		expect((await saved()).openRuns).toMatchObject([{ runId, plan: { coilId, name: 'neck' } }]);
	});

	it('with very many lines has a trace of bounded length with its first and last', async () => {
		const { runId } = await takeRun();
		const lines = Array.from({ length: 5000 }, (_, i) => line(i + 1));
		const trace = [
			{
				b: '5C0E91A7',
				sign: -1,
				fromSum: 1,
				fromNet: 1,
				toSum: 5000,
				fromTurns: 7,
				startT: 100,
				endT: 500_000
			} as const
		];
		await writeBatch(db.app, [write({ lines, changes: [{ kind: 'trace', runId, trace }] })]);
		const row = await db.owner
			.selectFrom('run_trace')
			.selectAll()
			.where('run_id', '=', runId)
			.executeTakeFirstOrThrow();
		expect(row.turns).toHaveLength(tracePointsMax);
		expect([row.turns[0], row.turns.at(-1)]).toEqual([7, 7 - 4999]);
	});

	it('that was put back is gone, its coil first in the queue, and its facts are still numbered', async () => {
		const { runId, coilId } = await takeRun();
		await queueCoil(db, shop.id, 'bridge');
		await writeBatch(db.app, [write({ facts: [fact(1, { runId })] })]);
		await writeBatch(db.app, [write({ facts: [fact(2)], changes: [{ kind: 'put-back', runId, coilId }] })]);
		const next = await inWorkshop(db.app, shop.id, (trx) => takeNextCoil(trx, shop.id, shop.winderId, new Date(at)));
		expect(next?.plan.coilId).toBe(coilId);
		const facts = await db.owner
			.selectFrom('fact')
			.select(['no', 'run_id'])
			.where('winder_id', '=', shop.winderId)
			.orderBy('no')
			.execute();
		expect(facts.map((row) => row.no)).toEqual([1, 2]);
		expect(facts.every((row) => row.run_id === null)).toBe(true);
	});

	it('is one for each of two benches that ask at the same moment', async () => {
		const second = await makeWinder(db, shop.id, 'w-02');
		await queueCoil(db, shop.id, 'neck');
		await queueCoil(db, shop.id, 'bridge');
		const ask = (winderId: string) =>
			inWorkshop(db.app, shop.id, (trx) => takeNextCoil(trx, shop.id, winderId, new Date(at)));
		const [one, two] = await Promise.all([ask(shop.winderId), ask(second.winderId)]);
		expect(new Set([one?.plan.name, two?.plan.name])).toEqual(new Set(['neck', 'bridge']));
		expect(one?.sticker).not.toBe(two?.sticker);
		expect(await ask(shop.winderId)).toBeNull();
	});
});

describe('sweeping', () => {
	it('takes lines before a moment, those since an open run was taken stay', async () => {
		await writeBatch(db.app, [write({ lines: [line(1), line(2)] })]);
		const { runId } = await takeRun();
		await db.owner
			.updateTable('run')
			.set({ taken_at: new Date(at + 150) })
			.where('id', '=', runId)
			.execute();
		const sweep = (before: number) => inWorkshop(db.app, shop.id, (trx) => sweepLines(trx, shop.id, new Date(before)));
		expect(await sweep(at + 100)).toBe(0);
		expect(await sweep(at + 86_400_000)).toBe(1);
		expect(await lineCount()).toBe(1);
	});

	it('leaves other workshops alone', async () => {
		await writeBatch(db.app, [write({ lines: [line(1)] })]);
		const other = await makeShop(db);
		expect(await inWorkshop(db.app, other.id, (trx) => sweepLines(trx, shop.id, new Date(at + 1e9)))).toBe(0);
		expect(await lineCount()).toBe(1);
	});
});

it('a tap is found by its id among the facts after a number', async () => {
	const tapId = randomUUID();
	await writeBatch(db.app, [write({ facts: [fact(1, { tapId, kind: 'kept' }), fact(2)] })]);
	const find = (afterNo: number) =>
		inWorkshop(db.app, shop.id, (trx) => findTap(trx, shop.id, shop.winderId, tapId, afterNo));
	expect(await find(0)).toEqual({ kind: 'kept' });
	expect(await find(1)).toBeNull();
});
