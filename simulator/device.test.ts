import fc from 'fast-check';
import { describe, expect, it, vi } from 'vitest';
import {
	formatLine,
	parseDeviceLine,
	type DeviceLine,
	type Event,
	type HostLine,
	type Tick
} from '../src/lib/turnline/index.ts';
import { Device, ordinaryDevice, type DeviceTraits } from './device.ts';
import { randomFrom } from './random.ts';

// Nothing here is about pace: a busy machine may take its time.
vi.setConfig({ testTimeout: 120_000 });

function newDevice(traits: Partial<DeviceTraits> = {}, seed = 1) {
	const events: Event[] = [];
	const lost: number[] = [];
	const freed: number[] = [];
	const device = new Device({ ...ordinaryDevice, ...traits }, randomFrom(seed, 'device'), 0, {
		event: (line) => events.push(line),
		lost: (line) => lost.push(line.e),
		acknowledged: (lines) => freed.push(...lines.map((line) => line.e))
	});
	let nowMs = 0;
	return {
		device,
		events,
		lost,
		freed,
		get nowMs() {
			return nowMs;
		},
		/** One magnet passes, forward or back, after a period. */
		turn(periodMs = 100, forward = true) {
			const [first, second] = forward ? (['A', 'B'] as const) : (['B', 'A'] as const);
			pass(nowMs + periodMs * 0.9);
			for (const [channel, on] of [
				[first, true],
				[second, true],
				[first, false],
				[second, false]
			] as const) {
				nowMs += periodMs * 0.025;
				device.edge({ atMs: nowMs, channel, on });
			}
			device.pass(nowMs);
		},
		wait(ms: number) {
			pass(nowMs + ms);
		},
		say(line: HostLine) {
			device.hear(formatLine(line), nowMs);
		},
		lines(): DeviceLine[] {
			return device.take(nowMs).map(read);
		}
	};

	function pass(untilMs: number) {
		while (nowMs < untilMs) {
			nowMs = Math.min(untilMs, nowMs + 20);
			device.pass(nowMs);
		}
	}
}

function read(text: string): DeviceLine {
	const parsed = parseDeviceLine(text);
	if (!parsed.ok || !parsed.line) throw new Error(`not a line: ${text}`);
	return parsed.line;
}

const isKept = (line: DeviceLine): line is Tick | Event => line.verb === 'T' || line.verb === 'E';

describe('what a winder says', () => {
	it('at a new link the birth line with the totals of now comes first', () => {
		const rig = newDevice();
		for (let turn = 0; turn < 30; turn++) rig.turn();
		rig.device.linkUp(rig.nowMs);
		expect(rig.lines()[0]).toMatchObject({ verb: 'HI', f: 30, v: 0, dir: 1, rep: 100, buf: 256, b: rig.device.boot });
	});

	it('ten ticks a second turning, one a second standing', () => {
		const rig = newDevice();
		rig.device.linkUp(0);
		rig.wait(5000);
		expect(rig.lines().filter((line) => line.verb === 'T')).toHaveLength(6);
		for (let turn = 0; turn < 50; turn++) rig.turn(100);
		const ticks = rig.lines().filter((line) => line.verb === 'T').length;
		expect(ticks).toBeGreaterThanOrEqual(45);
		expect(ticks).toBeLessThanOrEqual(52);
	});

	it('says go with the totals it stood at, and stop once no pulse comes', () => {
		const rig = newDevice();
		for (let turn = 0; turn < 10; turn++) rig.turn();
		rig.wait(499);
		expect(rig.events.map((event) => event.k)).toEqual(['go']);
		rig.wait(60);
		for (let turn = 0; turn < 2; turn++) rig.turn();
		expect(rig.events.map(({ k, f }) => [k, f])).toEqual([
			['go', 0],
			['stop', 10],
			['go', 10]
		]);
	});

	it('tells turning back from turning on, and one sensor does not', () => {
		const rig = newDevice();
		for (let turn = 0; turn < 5; turn++) rig.turn();
		for (let turn = 0; turn < 3; turn++) rig.turn(100, false);
		expect([rig.device.forward, rig.device.reverse]).toEqual([5, 3]);
		expect(rig.device.rpm).toBeLessThan(0);
		expect(rig.events.map((event) => event.k)).toEqual(['go', 'rev']);

		const blind = newDevice({ seesDirection: false });
		for (let turn = 0; turn < 5; turn++) blind.turn();
		for (let turn = 0; turn < 3; turn++) blind.turn(100, false);
		expect([blind.device.forward, blind.device.reverse]).toEqual([8, 0]);
	});

	it('suspects a magnet missed at steady speed and never adds it', () => {
		const rig = newDevice();
		for (const period of [100, 100, 100, 200, 100, 100]) rig.turn(period);
		expect(rig.device.suspectedMissed).toBe(1);
		expect(rig.device.forward).toBe(6);
	});

	it('reports a turn only when all magnets of it have passed', () => {
		const rig = newDevice({ pulsesPerTurn: 4 });
		for (let pulse = 0; pulse < 11; pulse++) rig.turn(25);
		expect(rig.device.forward).toBe(2);
	});

	it('a birth line with every number at its longest still goes out, without what it may leave out', () => {
		const rig = newDevice({
			name: 'w-0123456789abcd',
			retains: true,
			pulsesPerTurn: 64,
			timeScale: 500,
			bufLines: 99_999
		});
		rig.turn();
		rig.device.linkUp(rig.nowMs);
		rig.say({ verb: 'ACK', b: rig.device.boot, n: 1, e: 1 });
		rig.device.restart(rig.nowMs);
		rig.wait(4_000_000);
		rig.device.linkUp(rig.nowMs);
		const [line] = rig.lines();
		expect(line).toMatchObject({ verb: 'HI', dev: 'w-0123456789abcd', pf: 0 });
	});
});

const doings = fc.array(
	fc.oneof(
		{
			weight: 6,
			arbitrary: fc.record({
				do: fc.constant('turn' as const),
				period: fc.integer({ min: 60, max: 900 }),
				forward: fc.boolean()
			})
		},
		{ weight: 3, arbitrary: fc.record({ do: fc.constant('wait' as const), ms: fc.integer({ min: 10, max: 4000 }) }) },
		{ weight: 2, arbitrary: fc.record({ do: fc.constant('press' as const) }) },
		{
			weight: 3,
			arbitrary: fc.record({ do: fc.constant('take' as const), keep: fc.double({ min: 0, max: 1, noNaN: true }) })
		},
		{ weight: 2, arbitrary: fc.record({ do: fc.constant('ack' as const) }) },
		{ weight: 1, arbitrary: fc.record({ do: fc.constant('link' as const) }) },
		{ weight: 1, arbitrary: fc.record({ do: fc.constant('unlink' as const) }) }
	),
	{ maxLength: 150 }
);

describe('whatever happens to lines and acknowledgements', () => {
	it('totals never fall in a boot, n rises by one, and no event goes without its acknowledgement', () => {
		fc.assert(
			fc.property(doings, fc.integer(), (list, seed) => {
				const rig = newDevice({ bufLines: 4096 });
				const random = randomFrom(seed, 'loss');
				const host = newHost();
				for (const doing of list) {
					if (doing.do === 'turn') rig.turn(doing.period, doing.forward);
					if (doing.do === 'wait') rig.wait(doing.ms);
					if (doing.do === 'press') rig.device.press(rig.nowMs);
					if (doing.do === 'link') rig.device.linkUp(rig.nowMs);
					if (doing.do === 'unlink') rig.device.linkDown();
					if (doing.do === 'take') for (const line of rig.lines()) if (random() < doing.keep) host.take(line);
					if (doing.do === 'ack') rig.say(host.ack(rig.device.boot));
				}
				// Every event is either still kept or was stored by the host.
				const kept = new Set(rig.device.ring.events.map(({ line }) => line.e));
				for (const { e } of rig.events) expect(kept.has(e) || host.events.has(e)).toBe(true);
				expect(rig.freed.every((e) => host.events.has(e))).toBe(true);

				// Once the link is good, everything arrives and is freed.
				rig.device.linkUp(rig.nowMs);
				for (let round = 0; round < 12; round++) {
					rig.wait(1000);
					for (const line of rig.lines()) host.take(line);
					rig.say(host.ack(rig.device.boot));
				}
				expect(rig.device.settled).toBe(true);
				expect([...host.events].sort((a, b) => a - b)).toEqual(rig.events.map(({ e }) => e));
				host.check();
			}),
			{ numRuns: 60 }
		);
	});

	it('an event not acknowledged is sent again without being asked for', () => {
		const rig = newDevice();
		rig.device.linkUp(0);
		rig.turn();
		const times = () => rig.lines().filter((line) => line.verb === 'E' && line.k === 'go').length;
		expect(times()).toBe(1);
		rig.wait(1000);
		expect(times()).toBe(0);
		rig.wait(1500);
		expect(times()).toBe(1);
		rig.wait(2500);
		expect(times()).toBe(1);
		rig.say({ verb: 'ACK', b: rig.device.boot, n: 0, e: 1 });
		rig.wait(5000);
		expect(times()).toBe(0);
	});

	it('an acknowledgement of ticks, of another boot, or of what was never said frees no event', () => {
		const rig = newDevice();
		rig.turn();
		const b = rig.device.boot;
		rig.say({ verb: 'ACK', b, n: 1, e: 0 });
		rig.say({ verb: 'ACK', b: b === '00000001' ? '00000002' : '00000001', n: 1, e: 1 });
		rig.say({ verb: 'ACK', b, n: 900, e: 900 });
		expect(rig.device.settled).toBe(false);
		expect(rig.freed).toEqual([]);
	});
});

/** A host that stores what comes and acknowledges without a gap, and looks whether the lines of a boot agree. */
function newHost() {
	const kept = new Map<number, Tick | Event>();
	const events = new Set<number>();
	return {
		events,
		take(line: DeviceLine) {
			if (!isKept(line)) return;
			const before = kept.get(line.n);
			if (before) expect(line).toEqual(before);
			kept.set(line.n, line);
			if (line.verb === 'E') events.add(line.e);
		},
		ack(b: string): HostLine {
			let e = 0;
			while (events.has(e + 1)) e++;
			return { verb: 'ACK', b, n: Math.max(0, ...kept.keys()), e };
		},
		check() {
			const lines = [...kept.values()].sort((one, other) => one.n - other.n);
			for (let at = 1; at < lines.length; at++) {
				const [before, after] = [lines[at - 1]!, lines[at]!];
				expect(after.f).toBeGreaterThanOrEqual(before.f);
				expect(after.v).toBeGreaterThanOrEqual(before.v);
				expect(after.e).toBeGreaterThanOrEqual(before.e);
				expect(after.t).toBeGreaterThanOrEqual(before.t);
			}
		}
	};
}

describe('the ring', () => {
	it('gives up ticks within and keeps the newest, the oldest and every event', () => {
		const rig = newDevice({ bufLines: 32 });
		for (let turn = 0; turn < 300; turn++) rig.turn();
		rig.wait(20_000);
		expect(rig.device.ring.lines.length).toBeLessThanOrEqual(32);
		expect(rig.lost).toEqual([]);
		expect(rig.device.ring.events.map(({ line }) => line.e)).toEqual(rig.events.map(({ e }) => e));
		const ticks = rig.device.ring.lines.filter((kept) => kept.line.verb === 'T');
		expect(ticks[0]!.madeMs).toBeLessThan(200);
		expect(rig.nowMs - ticks[ticks.length - 1]!.madeMs).toBeLessThanOrEqual(1000);
	});

	it('never gives up an event without saying so', () => {
		fc.assert(
			fc.property(fc.array(fc.constantFrom('press', 'turn', 'wait'), { maxLength: 120 }), (list) => {
				const rig = newDevice({ bufLines: 32 });
				for (const doing of list) {
					if (doing === 'press') rig.device.press(rig.nowMs);
					if (doing === 'turn') rig.turn();
					if (doing === 'wait') rig.wait(700);
				}
				const { ring } = rig.device;
				expect(ring.lines.length).toBeLessThanOrEqual(32);
				const kept = ring.events.map(({ line }) => line.e);
				expect([...rig.lost, ...kept].sort((a, b) => a - b)).toEqual(rig.events.map(({ e }) => e));
				if (rig.lost.length > 0) {
					expect(ring.events.some(({ line }) => line.k === 'bufov')).toBe(true);
					// No tick is kept at the price of an event.
					expect(ring.events.length).toBe(ring.lines.length);
				}
			}),
			{ numRuns: 100 }
		);
	});

	it('comes after a new link as birth line, events, then ticks newest first, one a second', () => {
		const rig = newDevice();
		for (let turn = 0; turn < 100; turn++) rig.turn();
		rig.wait(3000);
		rig.device.press(rig.nowMs);
		rig.device.linkUp(rig.nowMs);
		const lines: DeviceLine[] = [];
		for (let beat = 0; beat < 50; beat++) {
			rig.wait(20);
			lines.push(...rig.lines());
		}
		const [first, ...rest] = lines;
		expect(first!.verb).toBe('HI');
		const asked = rest.filter(isKept).filter((line) => line.n <= (first as { n: number }).n);
		const events = asked.filter((line) => line.verb === 'E');
		expect(events.map((event) => event.e)).toEqual([1, 2, 3]);
		expect(asked.slice(0, 3)).toEqual(events);
		const ticks = asked.slice(3);
		expect(ticks.length).toBeGreaterThan(8);
		for (let at = 1; at < ticks.length; at++) expect(ticks[at - 1]!.t - ticks[at]!.t).toBeGreaterThanOrEqual(999);
	});

	it('is replayed at no more than 200 lines a second, with live lines between', () => {
		const rig = newDevice({ bufLines: 4096 });
		for (let event = 0; event < 900; event++) rig.device.press(rig.nowMs);
		rig.device.linkUp(rig.nowMs);
		let replayed = 0;
		let live = 0;
		for (let beat = 0; beat < 50; beat++) {
			rig.wait(20);
			if (beat === 25) rig.device.press(rig.nowMs);
			for (const line of rig.lines().filter(isKept)) {
				if (line.n <= 900) replayed++;
				else live++;
			}
		}
		expect(replayed).toBeLessThanOrEqual(200);
		expect(replayed).toBeGreaterThan(150);
		expect(live).toBeGreaterThanOrEqual(2);
	});

	it('a request for events sends them again, and one for events it no longer has says so', () => {
		const rig = newDevice();
		rig.device.linkUp(0);
		for (let event = 0; event < 4; event++) rig.device.press(0);
		rig.wait(40);
		rig.lines();
		const b = rig.device.boot;
		rig.say({ verb: 'SYNC', b, e: 2 });
		rig.wait(200);
		const again = rig.lines().filter((line) => line.verb === 'E');
		expect(again.map((event) => event.e)).toEqual([3, 4]);
		rig.say({ verb: 'ACK', b, n: 4, e: 3 });
		rig.say({ verb: 'SYNC', b, e: 1 });
		rig.wait(200);
		const answers = rig.lines();
		expect(answers).toContainEqual({ verb: 'NO', b, why: 'gone' });
		expect(answers.filter((line) => line.verb === 'E').map((event) => event.e)).toEqual([4]);
	});

	it('held, it sends no replay and one tick a second, and events still go', () => {
		const rig = newDevice();
		for (let turn = 0; turn < 100; turn++) rig.turn();
		rig.device.linkUp(rig.nowMs);
		rig.say({ verb: 'HOLD', ms: 3000 });
		const lines: DeviceLine[] = [];
		for (let turn = 0; turn < 20; turn++) {
			rig.turn();
			if (turn === 10) rig.device.press(rig.nowMs);
			lines.push(...rig.lines());
		}
		expect(lines.filter((line) => line.verb === 'T').length).toBeLessThanOrEqual(3);
		expect(lines.filter((line) => line.verb === 'E').map((event) => event.k)).toEqual(['btn']);
	});
});

describe('what a winder is told', () => {
	const plan = (b: string, changes = {}): HostLine => ({
		verb: 'SET',
		id: 17,
		b,
		tgt: 200,
		look: 80,
		ease: 40,
		stop: 3,
		fst: 20,
		...changes
	});

	it('a plan is taken once, however often it comes, and answered each time', () => {
		const rig = newDevice();
		const b = rig.device.boot;
		rig.device.linkUp(0);
		rig.say(plan(b));
		rig.say(plan(b, { tgt: 900 }));
		expect(rig.device.plan?.cue.target).toBe(200);
		expect(rig.lines().filter((line) => line.verb === 'OK')).toEqual([
			{ verb: 'OK', b, id: 17 },
			{ verb: 'OK', b, id: 17 }
		]);
	});

	it('a plan overtaken by a newer one on the way sets nothing', () => {
		const rig = newDevice();
		const b = rig.device.boot;
		rig.device.linkUp(0);
		rig.say(plan(b, { id: 4_294_967_295 }));
		rig.say(plan(b, { id: 2, tgt: 300 }));
		rig.say(plan(b, { id: 1, tgt: 400 }));
		expect(rig.device.plan?.cue.target).toBe(300);
		expect(rig.lines()).toContainEqual({ verb: 'NO', b, id: 1, why: 'old' });
	});

	it('a plan for another boot sets nothing', () => {
		const rig = newDevice();
		rig.device.linkUp(0);
		rig.say(plan(rig.device.boot === '00000001' ? '00000002' : '00000001'));
		expect(rig.device.plan).toBeNull();
		expect(rig.lines()).toContainEqual({ verb: 'NO', b: rig.device.boot, id: 17, why: 'boot' });
	});

	it('a plan of impossible length is refused', () => {
		const rig = newDevice();
		rig.device.linkUp(0);
		rig.say(plan(rig.device.boot, { tgt: 2_000_000_000 }));
		expect(rig.device.plan).toBeNull();
		expect(rig.lines()).toContainEqual({ verb: 'NO', b: rig.device.boot, id: 17, why: 'range' });
	});

	it('calls each mark of the plan once', () => {
		const rig = newDevice();
		rig.say(plan(rig.device.boot));
		const stand = () => rig.wait(2000);
		for (let turn = 0; turn < 20; turn++) rig.turn();
		stand();
		for (let turn = 20; turn < 202; turn++) rig.turn();
		stand();
		const called = rig.events.filter(({ k }) => k !== 'go' && k !== 'stop').map(({ k, f }) => [k, f]);
		expect(called).toEqual([
			['look', 17],
			['look', 77],
			['ease', 160],
			['at', 200],
			['over', 201]
		]);
	});

	it('a coil wound the other way from another zero has the same marks', () => {
		const rig = newDevice();
		for (let turn = 0; turn < 30; turn++) rig.turn();
		rig.wait(2000);
		rig.say(plan(rig.device.boot, { tgt: -170, from: 30, look: 0, fst: 0 }));
		expect(rig.device.turns).toBe(0);
		for (let turn = 0; turn < 200; turn++) rig.turn(100, false);
		expect(rig.device.turns).toBe(200);
		expect(rig.events.filter(({ k }) => k === 'ease' || k === 'at').map(({ k, v }) => [k, v])).toEqual([
			['ease', 160],
			['at', 200]
		]);
	});

	it('a mark is called again once the count has fallen five turns below it', () => {
		const rig = newDevice();
		rig.say(plan(rig.device.boot, { look: 0, fst: 0 }));
		const eases = () => rig.events.filter(({ k }) => k === 'ease').length;
		for (let turn = 0; turn < 161; turn++) rig.turn();
		for (let turn = 0; turn < 4; turn++) rig.turn(100, false);
		for (let turn = 0; turn < 4; turn++) rig.turn();
		expect(eases()).toBe(1);
		for (let turn = 0; turn < 7; turn++) rig.turn(100, false);
		for (let turn = 0; turn < 7; turn++) rig.turn();
		expect(eases()).toBe(2);
	});

	it('a target moved below the count is over at once, and said once', () => {
		const rig = newDevice();
		rig.say(plan(rig.device.boot, { look: 0, fst: 0 }));
		for (let turn = 0; turn < 100; turn++) rig.turn();
		rig.wait(2000);
		const overs = () => rig.events.filter(({ k }) => k === 'over').length;
		rig.say(plan(rig.device.boot, { id: 18, tgt: 63, look: 0, fst: 0 }));
		expect(overs()).toBe(1);
		rig.say(plan(rig.device.boot, { id: 19, tgt: 63, look: 0, fst: 0 }));
		expect(overs()).toBe(1);
	});

	it('a stop holds the motor off for two seconds, for this boot only', () => {
		const rig = newDevice();
		rig.device.linkUp(0);
		rig.say({ verb: 'STOP', id: 20, b: rig.device.boot === '00000001' ? '00000002' : '00000001' });
		expect(rig.device.motorReleased(rig.nowMs)).toBe(false);
		rig.say({ verb: 'STOP', id: 21, b: rig.device.boot });
		expect(rig.device.motorReleased(rig.nowMs)).toBe(true);
		rig.wait(2001);
		expect(rig.device.motorReleased(rig.nowMs)).toBe(false);
		expect(rig.lines().filter((line) => line.verb === 'OK' || line.verb === 'NO')).toEqual([
			{ verb: 'NO', b: rig.device.boot, id: 20, why: 'boot' },
			{ verb: 'OK', b: rig.device.boot, id: 21 }
		]);
	});

	it('a question mark is answered with the totals of now, an unknown verb with a reason, a spoilt line with silence', () => {
		const rig = newDevice();
		rig.device.linkUp(0);
		rig.lines();
		for (let turn = 0; turn < 7; turn++) rig.turn();
		rig.lines();
		rig.device.hear('?', rig.nowMs);
		expect(rig.lines()).toMatchObject([{ verb: 'HI', f: 7 }]);
		rig.device.hear(formatLine({ verb: 'BYE', b: rig.device.boot }), rig.nowMs);
		expect(rig.lines()).toEqual([{ verb: 'NO', b: rig.device.boot, why: 'verb' }]);
		rig.device.hear(formatLine({ verb: 'HOLD', ms: 10 }).replace('10', '20'), rig.nowMs);
		expect(rig.lines()).toEqual([]);
	});
});

describe('a restart', () => {
	it('is a new boot from zero, without the old plan and lines', () => {
		const rig = newDevice();
		const before = rig.device.boot;
		for (let turn = 0; turn < 9; turn++) rig.turn();
		const lost = rig.device.restart(rig.nowMs);
		expect(lost.map((event) => event.k)).toEqual(['go']);
		expect(rig.device.boot).not.toBe(before);
		expect([rig.device.forward, rig.device.lastEvent, rig.device.ring.lines.length]).toEqual([0, 0, 0]);
		rig.device.linkUp(rig.nowMs);
		expect(rig.lines()[0]).not.toHaveProperty('pb');
	});

	it('with totals that survive, the birth line continues the last boot the host acknowledged, through boots it never heard', () => {
		const rig = newDevice({ retains: true });
		rig.device.linkUp(0);
		for (let turn = 0; turn < 30; turn++) rig.turn();
		const heard = rig.device.boot;
		rig.say({ verb: 'ACK', b: heard, n: 2, e: 1 });
		for (let turn = 0; turn < 4; turn++) rig.turn(100, false);
		rig.device.restart(rig.nowMs);
		for (let turn = 0; turn < 40; turn++) rig.turn();
		rig.device.restart(rig.nowMs);
		for (let turn = 0; turn < 10; turn++) rig.turn();
		rig.device.linkUp(rig.nowMs);
		expect(rig.lines()[0]).toMatchObject({ verb: 'HI', f: 10, v: 0, pb: heard, pf: 70, pv: 4 });
	});
});
