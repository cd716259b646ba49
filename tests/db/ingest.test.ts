import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { writeBatch, type WinderWrite } from '../../src/lib/server/db/recorder.ts';
import type { IngestCore } from '../../src/lib/server/ingest/ingest.ts';
import type { Received } from '../../src/lib/server/ingest/types.ts';
import type { LiveHub } from '../../src/lib/server/live/hub.ts';
import { httpLinesMax, parseHostLine, withChecksum } from '../../src/lib/turnline/index.ts';
import { Clock, Counter, makeIngest, makeShop, makeWinder, queueCoil, tapOf, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let clock: Clock;
let shop: Shop;
let ingest: IngestCore;
let live: LiveHub;
const running: IngestCore[] = [];

beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(async () => {
	for (const one of running) await one.stop();
	await db.drop();
});
beforeEach(async () => {
	clock = new Clock();
	shop = await makeShop(db);
	({ ingest, live } = start());
});

function start(more: Parameters<typeof makeIngest>[2] = {}): ReturnType<typeof makeIngest> {
	const made = makeIngest(db.app, clock, more);
	running.push(made.ingest);
	return made;
}

const ref = () => ({ workshopId: shop.id, winderId: shop.winderId });
const ok = (received: Received) => {
	if (!received.ok) throw new Error(`refused: ${received.why}`);
	return received;
};
const send = async (lines: string[], to: IngestCore = ingest) => ok(await to.receive(ref(), lines, 'http', clock.now));
const tap = (kind: Parameters<typeof tapOf>[0], id?: string) =>
	ingest.tap(shop.id, shop.winderId, tapOf(kind, shop.ada, id), 0);
const view = async (of: IngestCore = ingest, winderId = shop.winderId) => {
	const found = await of.view(shop.id, winderId);
	if (!found) throw new Error('no view');
	return found;
};
const facts = () =>
	db.owner.selectFrom('fact').selectAll().where('winder_id', '=', shop.winderId).orderBy('no').execute();
const runs = () =>
	db.owner.selectFrom('run').selectAll().where('workshop_id', '=', shop.id).orderBy('taken_at').execute();
const coilState = async (coilId: string) =>
	(await db.owner.selectFrom('coil').select(['state', 'place']).where('id', '=', coilId).executeTakeFirstOrThrow())
		.state;
const keptLines = () =>
	db.owner.selectFrom('kept_line').selectAll().where('winder_id', '=', shop.winderId).orderBy('n').execute();

/** The database takes nothing while `away` is set. */
function failing() {
	const gate = { away: false, tried: 0 };
	const write = async (writes: WinderWrite[]) => {
		gate.tried += 1;
		if (gate.away)
			throw Object.assign(new Error('cannot execute INSERT in a read-only transaction'), { code: '25006' });
		await writeBatch(db.app, writes);
	};
	return { gate, write };
}

describe('lines', () => {
	it('are each stored, thinned, duplicate or rejected', async () => {
		const counter = new Counter(clock, '5C0E91A7');
		const lines = [counter.hi(), counter.event('go'), counter.tick(1, 100), counter.tick(1, 100), '', '# a comment'];
		const spoilt = counter.tick(1).replace('T ', 'X ');
		const first = await send([...lines, spoilt]);
		expect(first.stored + first.thinned + first.duplicate + first.rejected.length).toBe(5);
		expect(first.rejected).toEqual([{ line: 7, why: 'checksum', text: expect.any(String) }]);
		expect(first.ack).toEqual({ b: '5C0E91A7', n: 3, e: 1 });

		const again = await send(lines);
		expect(again).toMatchObject({ duplicate: 3, ack: { n: 3, e: 1 } });
		expect(await view()).toMatchObject({ boot: '5C0E91A7', forward: 2, reverse: 0, net: 2, link: 'live', run: null });
	});

	it('are on disk when they are acknowledged, with their cursor', async () => {
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(40)]);
		const lines = await keptLines();
		expect(lines.filter((line) => line.k !== null).map((line) => line.k)).toEqual(['go', 'stop']);
		const boot = await db.owner.selectFrom('boot').selectAll().where('winder_id', '=', shop.winderId).execute();
		expect(boot).toMatchObject([{ boot: '5C0E91A7', n: counter.n, e: 2, forward: 40, reverse: 0 }]);
	});

	it('are refused as a whole when none can be read', async () => {
		expect(await ingest.receive(ref(), ['nonsense', 'T f=1'], 'http', clock.now)).toMatchObject({
			ok: false,
			why: 'nothing-parsed',
			rejected: [{ line: 1 }, { line: 2 }]
		});
		expect(ingest.linkLog(shop.id, shop.winderId).refused).not.toEqual({});
	});

	it('of an empty request are a poll for commands', async () => {
		expect(await send([])).toMatchObject({ ack: null, stored: 0, commands: [], retryMs: 1000 });
	});

	it('beyond the rate are refused as a whole, and taken once there is room', async () => {
		const counter = new Counter(clock, '5C0E91A7');
		const batch = () => Array.from({ length: 300 }, () => counter.tick(0, 1));
		await send(batch());
		await send(batch());
		const third = batch();
		const refused = await ingest.receive(ref(), third, 'http', clock.now);
		expect(refused).toMatchObject({ ok: false, why: 'rate' });
		expect((await view()).boot).toBe('5C0E91A7');
		expect(await keptLines().then((lines) => lines.every((line) => line.n <= 600))).toBe(true);
		clock.pass(15_000);
		expect((await send(third)).duplicate).toBe(0);
	});

	it('are all kept while their winder is asked for in another spelling of its id', async () => {
		await queueCoil(db, shop.id, 'neck', 500);
		const capitals = shop.winderId.toUpperCase();
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi()]);
		for (let batch = 0; batch < 25; batch++) {
			const lines = counter.wind(3);
			const [sent, shown] = await Promise.all([
				ingest.receive(
					{ workshopId: shop.id, winderId: batch % 2 ? capitals : shop.winderId },
					lines,
					'http',
					clock.now
				),
				ingest.view(shop.id, capitals)
			]);
			expect(ok(sent)).toMatchObject({ duplicate: 0, ack: { n: counter.n, e: counter.e } });
			expect(shown?.winderId).toBe(shop.winderId);
		}
		expect(await view()).toMatchObject({ forward: 75, run: { turns: 75 } });
		const kept = await facts();
		expect(kept.map((fact) => fact.no)).toEqual(kept.map((_, i) => i + 1));
		expect(kept.filter((fact) => fact.kind === 'stopped')).toHaveLength(25);
		expect(ingest.linkLog(shop.id, capitals)).toEqual(ingest.linkLog(shop.id, shop.winderId));
		const watcher = live.open(shop.id, capitals);
		expect(live.watchers(shop.id, shop.winderId)).toBe(1);
		watcher.end();
	});

	it('that come while their winder is being read in two spellings find one bench', async () => {
		const { ingest: fresh } = start();
		const counter = new Counter(clock, '5C0E91A7');
		const to = (winderId: string, lines: string[]) =>
			fresh.receive({ workshopId: shop.id, winderId }, lines, 'http', clock.now);
		const batches = [[counter.hi(), counter.tick(1)], [counter.tick(1)]] as const;
		await Promise.all([to(shop.winderId, [...batches[0]]), to(shop.winderId.toUpperCase(), [...batches[1]])]);
		expect(await view(fresh)).toMatchObject({ forward: 2 });
		expect(await view(fresh, shop.winderId.toUpperCase())).toMatchObject({ forward: 2 });
	});

	it('of too many at once are refused', async () => {
		const lines = Array.from({ length: httpLinesMax + 1 }, () => '');
		expect(await ingest.receive(ref(), lines, 'http', clock.now)).toEqual({ ok: false, why: 'too-many-lines' });
	});

	it('of a foreign or unknown winder are nobody’s', async () => {
		const other = await makeShop(db);
		const foreign = { workshopId: shop.id, winderId: other.winderId };
		expect(await ingest.receive(foreign, [], 'http', clock.now)).toEqual({ ok: false, why: 'not-found' });
		expect(await ingest.view(shop.id, other.winderId)).toBeNull();
		expect(await ingest.view(shop.id, 'w-01')).toBeNull();
		expect(await ingest.tap(shop.id, randomUUID(), tapOf({ kind: 'keep' }, shop.ada), 0)).toEqual({
			ok: false,
			why: 'not-found'
		});
	});

	it('may come as JSON', async () => {
		const line = JSON.stringify({ verb: 'T', b: '5C0E91A7', n: 2, e: 0, f: 7, v: 0, r: 58, t: 1040 });
		expect(ok(await ingest.receive(ref(), [line], 'ndjson', clock.now)).stored).toBe(1);
		expect(await view()).toMatchObject({ forward: 7 });
	});

	it('of two workshops go in one batch, each into its own', async () => {
		const batches: WinderWrite[][] = [];
		const write = async (writes: WinderWrite[]) => {
			batches.push(writes);
			await writeBatch(db.app, writes);
		};
		const both = start({ write });
		const other = await makeShop(db);
		const one = new Counter(clock, 'AAAA0001');
		const two = new Counter(clock, 'AAAA0002');
		await both.ingest.view(shop.id, shop.winderId);
		await both.ingest.view(other.id, other.winderId);
		await Promise.all([
			both.ingest.receive(ref(), [one.event('go')], 'http', clock.now),
			both.ingest.receive({ workshopId: other.id, winderId: other.winderId }, [two.event('go')], 'http', clock.now)
		]);
		expect(batches.map((batch) => batch.length)).toEqual([2]);
		const rows = await db.owner
			.selectFrom('kept_line')
			.select(['workshop_id', 'boot'])
			.where('boot', 'in', ['AAAA0001', 'AAAA0002'])
			.orderBy('boot')
			.execute();
		expect(rows).toEqual([
			{ workshop_id: shop.id, boot: 'AAAA0001' },
			{ workshop_id: other.id, boot: 'AAAA0002' }
		]);
	});
});

describe('the traces of the protocol', () => {
	it('a reconnect shows the totals of now at once, before any tick', async () => {
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), counter.tick(1)]);
		await queueCoil(db, shop.id, 'bridge', 8000);
		await ingest.queueChanged(shop.id);
		await send(counter.wind(300));
		clock.pass(300_000);
		counter.t += 300_000;
		counter.f += 3000;
		await send([counter.hi({ n: counter.n + 900 } as never)]);
		expect(await view()).toMatchObject({ forward: 3301, run: { turns: 3300 } });
	});

	it('an event lost on the way is not freed by a later tick', async () => {
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), counter.event('go')]);
		const lost = counter.event('stop');
		const spoilt = lost.replace(/~.*/, '~0000');
		const answer = await send([spoilt, counter.tick(0, 100, 0)]);
		expect(answer.ack).toEqual({ b: '5C0E91A7', n: counter.n, e: 1 });
		expect(answer.commands.map((text) => parseHostLine(text))).toContainEqual({
			ok: true,
			line: { verb: 'SYNC', b: '5C0E91A7', e: 1 }
		});
		expect((await send([lost])).ack).toEqual({ b: '5C0E91A7', n: counter.n, e: 2 });
		expect((await keptLines()).map((line) => line.k).filter(Boolean)).toEqual(['go', 'stop']);
	});

	it('a device that has the events no more is not asked again and again', async () => {
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi()]);
		counter.event('go');
		await send([counter.tick(0, 100, 0)]);
		await send([withChecksum('NO b=5C0E91A7 why=gone')]);
		clock.pass(60_000);
		expect((await send([])).commands.filter((text) => text.startsWith('SYNC'))).toEqual([]);
		expect((await facts()).map((fact) => fact.kind)).toContain('event-lost');
	});

	it('totals retained through boots never heard lose no turn', async () => {
		await queueCoil(db, shop.id, 'bridge', 8000);
		const first = new Counter(clock, 'AAAAAAAA');
		await send([first.hi(), ...first.wind(50)]);
		const third = new Counter(clock, 'CCCCCCCC');
		clock.pass(2_000);
		third.f = 5;
		await send([third.hi({ pb: 'AAAAAAAA', pf: 90, pv: 0 } as never)]);
		const { run } = await view();
		expect(run).toMatchObject({ question: null, turns: 95 });
	});

	it('stopped, tapped and begun anew while the link was down: each coil gets its own turns', async () => {
		await queueCoil(db, shop.id, 'neck', 320);
		await queueCoil(db, shop.id, 'bridge', 320);
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(100)]);
		// From here nothing reaches the server.
		const unsent = counter.wind(220);
		clock.pass(4_000);
		counter.t += 4_000;
		const answer = await tap({ kind: 'keep' });
		expect(answer).toMatchObject({ ok: true, pending: true, live: { run: { pendingTap: 'keep' } } });
		clock.pass(3_000);
		counter.t += 3_000;
		unsent.push(counter.tick(0, 10, 0), ...counter.wind(30));
		await send([counter.hi(), ...unsent.filter((line) => line.startsWith('E'))]);
		await send(unsent.filter((line) => line.startsWith('T')).reverse());
		await send([counter.tick(0, 100, 0)]);
		await ingest.flush();
		const [neck, bridge] = await runs();
		expect(neck).toMatchObject({ state: 'kept', turns: 320, on_bobbin: 320 });
		expect(bridge).toMatchObject({ state: 'open', coil_name: 'bridge' });
		expect((await view()).run).toMatchObject({ runId: bridge?.id, turns: 30 });
	});
});

describe('a coil', () => {
	it('is taken by the winder that is heard, wound, kept once, and followed by the next', async () => {
		const neck = await queueCoil(db, shop.id, 'neck');
		const bridge = await queueCoil(db, shop.id, 'bridge');
		const counter = new Counter(clock, '5C0E91A7');
		const first = await send([counter.hi()]);
		expect(first.commands.map((text) => text.split(' ')[0])).toEqual(['SET']);
		await send(counter.wind(100));
		expect((await view()).run).toMatchObject({ state: 'on-count', turns: 100, left: 0, coil: { name: 'neck' } });

		const id = randomUUID();
		const taps = await Promise.all([tap({ kind: 'keep' }, id), tap({ kind: 'keep' }, id), tap({ kind: 'keep' })]);
		expect(taps.map((answer) => (answer.ok ? 'ok' : answer.why))).toEqual(['ok', 'ok', 'not-now']);

		const [run] = await runs();
		expect(run).toMatchObject({ state: 'kept', turns: 100, on_bobbin: 100, ended_by: shop.ada, coil_id: neck.id });
		expect(run?.winding_ms).toBeGreaterThan(9_000);
		expect(run?.rpm_top).toBe(600);
		expect(run?.sticker).toMatch(/^[2-9A-HJKMNP-TV-Z]{4}$/);
		expect(await coilState(neck.id)).toBe('wound');
		const kept = (await facts()).filter((fact) => fact.kind === 'kept');
		expect(kept).toMatchObject([{ run_id: run?.id, member_id: shop.ada, tap_id: id, turns: 100 }]);
		const numbers = (await facts()).map((fact) => fact.no);
		expect(numbers).toEqual(numbers.map((_, i) => i + 1));

		const trace = await db.owner
			.selectFrom('run_trace')
			.selectAll()
			.where('run_id', '=', run!.id)
			.executeTakeFirstOrThrow();
		expect(trace.turns.at(-1)).toBe(100);
		expect(Math.min(...trace.at_ms)).toBeGreaterThanOrEqual(0);

		await send([counter.tick(0, 1000, 0)]);
		expect(await coilState(bridge.id)).toBe('on-bench');
		expect(await view()).toMatchObject({ run: { state: 'kept' }, next: { name: 'bridge', target: 100 }, waiting: 1 });
		clock.pass(11_000);
		counter.t += 11_000;
		ingest.tick();
		await send(counter.wind(4));
		expect(await view()).toMatchObject({
			run: { coil: { name: 'bridge' }, turns: 4 },
			last: { name: 'neck', onBobbin: 100, sticker: run?.sticker },
			waiting: 0,
			next: null
		});
	});

	it('that was kept can be undone within ten seconds, and not after', async () => {
		const neck = await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(98)]);
		expect(await tap({ kind: 'keep' })).toMatchObject({ ok: true });
		clock.pass(5_000);
		expect(await tap({ kind: 'undo' })).toMatchObject({ ok: true, live: { run: { state: 'on-count' } } });
		expect(await runs()).toMatchObject([{ state: 'open', turns: null, ended_at: null }]);
		expect(await coilState(neck.id)).toBe('on-bench');
		counter.t += 5_000;
		await send([counter.tick(0, 100, 0)]);
		expect(await tap({ kind: 'keep' })).toMatchObject({ ok: true, pending: false });
		clock.pass(10_001);
		ingest.tick();
		expect(await tap({ kind: 'undo' })).toMatchObject({ ok: false });
		expect(await runs()).toMatchObject([{ state: 'kept', turns: 98 }]);
	});

	it('that was set aside is next again, and taking that back leaves one run', async () => {
		const neck = await queueCoil(db, shop.id, 'neck');
		await queueCoil(db, shop.id, 'bridge');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(20)]);
		expect(await tap({ kind: 'set-aside', reason: 'wire scraped' })).toMatchObject({ ok: true });
		await send([counter.tick(0, 1000, 0)]);
		const after = await runs();
		expect(after).toMatchObject([
			{ coil_id: neck.id, state: 'set-aside', set_aside_reason: 'wire scraped', turns: 20 },
			{ coil_id: neck.id, state: 'open' }
		]);
		expect(await tap({ kind: 'undo' })).toMatchObject({ ok: true, live: { run: { turns: 20 } } });
		expect(await runs()).toMatchObject([{ id: after[0]?.id, state: 'open' }]);
		expect(await coilState(neck.id)).toBe('on-bench');
		const numbers = (await facts()).map((fact) => fact.no);
		expect(numbers).toEqual(numbers.map((_, i) => i + 1));
	});

	it('that was set aside stays with its bench while that can be undone, and then goes to whoever is free', async () => {
		const neck = await queueCoil(db, shop.id, 'neck');
		const second = await makeWinder(db, shop.id, 'w-02');
		const one = new Counter(clock, 'AAAA0001');
		const two = new Counter(clock, 'AAAA0002');
		const sendTwo = async () =>
			ok(
				await ingest.receive(
					{ workshopId: shop.id, winderId: second.winderId },
					[two.tick(0, 100, 0)],
					'http',
					clock.now
				)
			);
		await send([one.hi(), ...one.wind(20)]);
		// A screen at the other bench: it comes before this one, which is only heard.
		const watcher = live.open(shop.id, second.winderId);
		await sendTwo();
		expect(await tap({ kind: 'set-aside', reason: 'wire scraped' })).toMatchObject({ ok: true });
		await send([one.tick(0, 1000, 0)]);
		for (let i = 0; i < 3; i++) await sendTwo();
		expect((await view(ingest, second.winderId)).run).toBeNull();
		expect(await tap({ kind: 'undo' })).toMatchObject({ ok: true, live: { run: { turns: 20 } } });
		expect(await runs()).toMatchObject([{ coil_id: neck.id, state: 'open', winder_id: shop.winderId }]);

		// Once more; now this bench is silent until the time is over.
		expect(await tap({ kind: 'set-aside', reason: 'wire scraped' })).toMatchObject({ ok: true });
		await send([one.tick(0, 1000, 0)]);
		await ingest.putBack(shop.id, shop.winderId);
		clock.pass(4_000);
		await ingest.queueChanged(shop.id);
		await sendTwo();
		expect(await view(ingest, second.winderId)).toMatchObject({ run: null, waiting: 1 });
		clock.pass(7_000);
		ingest.tick();
		await sendTwo();
		expect(await view(ingest, second.winderId)).toMatchObject({ run: { coil: { coilId: neck.id } } });
		expect(await tap({ kind: 'undo' })).toMatchObject({ ok: false });
		expect((await runs()).filter((run) => run.state === 'open')).toHaveLength(1);
		watcher.end();
	});

	it('that has not turned can be put back, and is left to others until the queue changes', async () => {
		const neck = await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi()]);
		expect(await coilState(neck.id)).toBe('on-bench');
		expect(await ingest.putBack(shop.id, shop.winderId)).toBe('ok');
		expect(await coilState(neck.id)).toBe('waiting');
		expect(await runs()).toEqual([]);
		await send([counter.tick(0, 1000, 0)]);
		expect(await ingest.putBack(shop.id, shop.winderId)).toBe('no-run');
		await ingest.queueChanged(shop.id);
		expect(await coilState(neck.id)).toBe('on-bench');
		await send(counter.wind(3));
		expect(await ingest.putBack(shop.id, shop.winderId)).toBe('turned');
	});

	it('edited on the bench keeps its turns and gets the new target', async () => {
		const neck = await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(20)]);
		await db.owner.updateTable('coil').set({ target: 15 }).where('id', '=', neck.id).execute();
		await ingest.planChanged(shop.id, neck.id);
		expect((await view()).run).toMatchObject({ turns: 20, target: 15, left: -5 });
		expect(await runs()).toMatchObject([{ target: 15 }]);
	});

	it('goes to the bench that is watched before one that is only heard', async () => {
		const second = await makeWinder(db, shop.id, 'w-02');
		const heard = new Counter(clock, '5C0E91A7');
		await send([heard.hi()]);
		await view(ingest, second.winderId);
		const watcher = live.open(shop.id, second.winderId);
		await queueCoil(db, shop.id, 'neck');
		await ingest.queueChanged(shop.id);
		watcher.end();
		expect(await runs()).toMatchObject([{ winder_id: second.winderId }]);
	});

	it('wound on another winder than the one it lies at moves there once the maker says so', async () => {
		const second = await makeWinder(db, shop.id, 'w-02');
		await queueCoil(db, shop.id, 'neck');
		const first = new Counter(clock, '5C0E91A7');
		await send([first.hi()]);
		const other = new Counter(clock, 'BBBB0001');
		const sendOther = (lines: string[]) =>
			ingest.receive({ workshopId: shop.id, winderId: second.winderId }, lines, 'http', clock.now);
		await sendOther([other.hi(), ...other.wind(8)]);
		expect((await view()).run).toMatchObject({ question: 'which-winder', questionDetail: { otherName: 'w-02' } });
		expect(await tap({ kind: 'other-winder' })).toMatchObject({ ok: true });
		expect((await view()).run).toBeNull();
		expect((await view(ingest, second.winderId)).run).toMatchObject({ coil: { name: 'neck' } });
		await ingest.flush();
		expect(await runs()).toMatchObject([{ winder_id: second.winderId, state: 'open' }]);
	});
});

describe('a restart', () => {
	it('goes on with totals, run and count, and counts nothing twice', async () => {
		await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi()]);
		const lines = counter.wind(60);
		await send(lines.slice(0, 40));
		const before = await view();
		// Killed: nothing is told to the first; a second one reads the same database.
		const next = start().ingest;
		expect(await view(next)).toMatchObject({
			forward: before.forward,
			net: before.net,
			run: { runId: before.run?.runId }
		});
		await send([counter.hi(), ...lines], next);
		expect((await view(next)).run).toMatchObject({ turns: 60, runId: before.run?.runId });
	});

	it('between the taking of a coil and its first line keeps the coil on the bench', async () => {
		const { gate, write } = failing();
		const before = start({ write, saveWaitMsMax: 30 }).ingest;
		await before.view(shop.id, shop.winderId);
		const neck = await queueCoil(db, shop.id, 'neck');
		gate.away = true;
		const counter = new Counter(clock, '5C0E91A7');
		await before.queueChanged(shop.id);
		await before.receive(ref(), [counter.hi()], 'http', clock.now);
		await before.receive(ref(), [counter.tick(0, 100, 0)], 'http', clock.now);
		const [run] = await runs();
		const next = start().ingest;
		expect((await view(next)).run).toMatchObject({ runId: run?.id, coil: { coilId: neck.id }, state: 'waiting' });
		expect(await coilState(neck.id)).toBe('on-bench');
	});

	it('keeps a tap that waits for lines, and knows it when it comes again', async () => {
		await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(100)]);
		clock.pass(6_000);
		const id = randomUUID();
		expect(await tap({ kind: 'keep' }, id)).toMatchObject({ ok: true, pending: true });
		const next = start().ingest;
		expect((await view(next)).run).toMatchObject({ pendingTap: 'keep' });
		expect(await next.tap(shop.id, shop.winderId, tapOf({ kind: 'keep' }, shop.ada, id), 0)).toMatchObject({
			ok: true
		});
		counter.t += 8_000;
		clock.pass(2_000);
		await send([counter.hi(), counter.tick(0, 1, 0)], next);
		await next.flush();
		expect(await runs()).toMatchObject([{ state: 'kept', turns: 100 }]);
		expect((await facts()).filter((fact) => fact.kind === 'kept')).toHaveLength(1);
	});

	it('answers a tap of long ago from the record', async () => {
		await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(100)]);
		const id = randomUUID();
		await tap({ kind: 'keep' }, id);
		await ingest.flush();
		// A snapshot that remembers no taps, as after very many others.
		await db.owner
			.updateTable('winder_state')
			.set((eb) => ({
				state: eb.fn('jsonb_set', ['state', eb.val('{tapsDone}'), eb.cast(eb.val('[]'), 'jsonb')]) as never
			}))
			.where('winder_id', '=', shop.winderId)
			.execute();
		const next = start().ingest;
		expect(await next.tap(shop.id, shop.winderId, tapOf({ kind: 'keep' }, shop.ada, id), 0)).toMatchObject({
			ok: true
		});
		expect((await facts()).filter((fact) => fact.kind === 'kept')).toHaveLength(1);
	});
});

describe('a database that takes nothing', () => {
	it('acknowledges nothing, says so on the bench, and recovers by itself', async () => {
		await queueCoil(db, shop.id, 'neck');
		const { gate, write } = failing();
		const own = start({ write, saveWaitMsMax: 400 }).ingest;
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), counter.event('go')], own);
		gate.away = true;
		const lines = [counter.tick(1), counter.tick(1), counter.event('stop')];
		expect(await own.receive(ref(), lines, 'http', clock.now)).toEqual({ ok: false, why: 'not-saved', retryAfterS: 2 });
		expect(await view(own)).toMatchObject({ forward: 2, saving: false, run: { turns: 2 } });
		// Sent again they are known, and still not acknowledged.
		expect(await own.receive(ref(), lines, 'http', clock.now)).toMatchObject({ ok: false, why: 'not-saved' });
		expect(await own.tap(shop.id, shop.winderId, tapOf({ kind: 'set-aside', reason: 'x' }, shop.ada), 0)).toMatchObject(
			{
				ok: false,
				why: 'not-saved'
			}
		);
		expect((await keptLines()).map((line) => line.k)).toEqual(['go']);
		expect(await runs()).toMatchObject([{ state: 'open' }]);

		gate.away = false;
		expect(await own.flush()).toBe(true);
		expect(await send(lines, own)).toMatchObject({ duplicate: 3, ack: { e: 2 } });
		expect(await view(own)).toMatchObject({ saving: true, unsaved: 0 });
		expect((await keptLines()).map((line) => line.k).filter(Boolean)).toEqual(['go', 'stop']);
		expect((await runs())[0]).toMatchObject({ state: 'set-aside', turns: 2 });
		const numbers = (await facts()).map((fact) => fact.no);
		expect(numbers).toEqual(numbers.map((_, i) => i + 1));
	});

	it('is tried again without anybody asking', async () => {
		const { gate, write } = failing();
		const own = start({ write, saveWaitMsMax: 20 });
		const counter = new Counter(clock, '5C0E91A7');
		await own.ingest.view(shop.id, shop.winderId);
		gate.away = true;
		expect(await own.ingest.receive(ref(), [counter.event('go')], 'http', clock.now)).toMatchObject({ ok: false });
		// The first try has failed by now.
		await own.ingest.flush();
		expect(own.live.latest(shop.id, shop.winderId)).toMatchObject({ saving: false });
		gate.away = false;
		for await (const shown of own.live.watch(shop.id, shop.winderId)) if (shown.saving) break;
		expect(await keptLines()).toHaveLength(1);
	});

	it('and breaks off after a coil was taken, but before the answer, loses no coil', async () => {
		let breaks = true;
		const broken = new Proxy(db.app, {
			get(target, name) {
				if (name !== 'transaction') return Reflect.get(target, name, target) as unknown;
				return () => ({
					async execute(work: Parameters<ReturnType<typeof target.transaction>['execute']>[0]) {
						const done = await target.transaction().execute(work);
						if (breaks && done !== null && typeof done === 'object' && 'sticker' in done) {
							breaks = false;
							throw new Error('Connection terminated unexpectedly');
						}
						return done;
					}
				});
			}
		});
		const own = makeIngest(broken, clock).ingest;
		running.push(own);
		const neck = await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi()], own);
		expect((await view(own)).run).toBeNull();
		expect(await coilState(neck.id)).toBe('on-bench');
		clock.pass(2_000);
		counter.t += 2_000;
		await send([counter.tick(0, 100, 0)], own);
		await own.queueChanged(shop.id);
		expect((await view(own)).run).toMatchObject({ coil: { coilId: neck.id }, state: 'waiting' });
		expect(await runs()).toHaveLength(1);
	});

	it('for one fact of a winder saves all else of it after some tries, and the bench goes on', async () => {
		const poisoned: unknown[] = [];
		const { ingest: own } = start({
			saveWaitMsMax: 60_000,
			// As if it had come past the edge: half a character is refused by the database itself.
			write: (writes) =>
				writeBatch(
					db.app,
					writes.map((write) => ({
						...write,
						facts: write.facts.map((fact) => (fact.kind === 'stopped' ? { ...fact, detail: { word: '\ud800' } } : fact))
					}))
				),
			onError: (what) => poisoned.push(what)
		});
		await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		expect(await send([counter.hi(), ...counter.wind(20)], own)).toMatchObject({ ack: { n: counter.n, e: 2 } });
		expect(await view(own)).toMatchObject({ saving: true, unsaved: 0, run: { turns: 20 } });
		expect(poisoned.filter((what) => String(what).startsWith('GIVEN UP'))).toEqual([
			expect.stringContaining('"kind":"stopped"')
		]);
		expect((await facts()).map((fact) => fact.kind)).not.toContain('stopped');
		expect((await keptLines()).map((row) => row.k).filter(Boolean)).toEqual(['go', 'stop']);
		expect(await own.stop()).toBeNull();
		const { ingest: next } = start();
		expect(await view(next)).toMatchObject({ forward: 20, run: { turns: 20 } });
	});

	it('at the stop is said with how many lines it left', async () => {
		const { gate, write } = failing();
		const { ingest: own } = start({ write, saveWaitMsMax: 10 });
		gate.away = true;
		const counter = new Counter(clock, '5C0E91A7');
		expect(await own.receive(ref(), [counter.event('go'), counter.event('stop')], 'http', clock.now)).toMatchObject({
			ok: false,
			why: 'not-saved'
		});
		expect(await own.stop()).toEqual({ lines: 2 });
		expect(await keptLines()).toEqual([]);
	});

	it('for one winder’s rows does not hold up the others', async () => {
		const second = await makeWinder(db, shop.id, 'w-02');
		const refused = start({
			saveWaitMsMax: 500,
			write: async (writes) => {
				if (writes.some((write) => write.winderId === second.winderId)) {
					throw Object.assign(new Error('value out of range'), { code: '22003' });
				}
				await writeBatch(db.app, writes);
			}
		}).ingest;
		await refused.view(shop.id, second.winderId);
		await refused.view(shop.id, shop.winderId);
		const one = new Counter(clock, 'AAAA0001');
		const two = new Counter(clock, 'AAAA0002');
		const [good, bad] = await Promise.all([
			refused.receive(ref(), [one.event('go')], 'http', clock.now),
			refused.receive({ workshopId: shop.id, winderId: second.winderId }, [two.event('go')], 'http', clock.now)
		]);
		expect(good).toMatchObject({ ok: true });
		expect(bad).toMatchObject({ ok: false, why: 'not-saved' });
		expect(await view(refused)).toMatchObject({ saving: true });
		expect(await view(refused, second.winderId)).toMatchObject({ saving: false });
	});
});

describe('a winder nobody sends to, taps or watches', () => {
	it('leaves the memory after a while and comes back as it was', async () => {
		await queueCoil(db, shop.id, 'neck');
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(30)]);
		const before = await view();
		clock.pass(1_001);
		ingest.tick();
		await ingest.flush();
		clock.pass(11 * 60_000);
		ingest.tick();
		expect(live.latest(shop.id, shop.winderId)).toBeNull();
		expect(await view()).toMatchObject({
			forward: 30,
			link: 'no-signal',
			run: { runId: before.run?.runId, turns: 30, windingMs: before.run?.windingMs }
		});
	});

	it('stays while a screen watches it, and is told when its signal is lost', async () => {
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), counter.tick(0, 100, 0)]);
		const watcher = live.open(shop.id, shop.winderId);
		expect(await watcher.next()).toMatchObject({ view: { link: 'live' } });
		const coming = watcher.next();
		clock.pass(11 * 60_000);
		ingest.tick();
		expect(await coming).toMatchObject({ view: { link: 'no-signal', forward: 0 } });
		expect(live.latest(shop.id, shop.winderId)).not.toBeNull();
		watcher.end();
	});
});

describe('raw lines', () => {
	it('a week old are swept, but not those of an open run', async () => {
		const counter = new Counter(clock, '5C0E91A7');
		await send([counter.hi(), ...counter.wind(5)]);
		clock.pass(60_000);
		counter.t += 60_000;
		await queueCoil(db, shop.id, 'neck');
		await ingest.queueChanged(shop.id);
		await send(counter.wind(5));
		const before = (await keptLines()).length;
		clock.pass(8 * 86_400_000);
		await ingest.sweep();
		const left = await keptLines();
		expect(left.length).toBeLessThan(before);
		expect(left.map((line) => line.k).filter(Boolean)).toEqual(['go', 'stop']);
	});
});
