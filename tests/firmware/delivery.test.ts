import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import {
	replayLinesPerSecondMax,
	type DeviceLine,
	type Event,
	type Hi,
	type Tick
} from '../../src/lib/turnline/index.ts';
import { randomFrom } from '../../simulator/random.ts';
import { Board, isEvent, isTick, kindsOf, withBoard } from './board.ts';

const b = '5C0E91A7';
const hi = (lines: DeviceLine[]) => lines.filter((line): line is Hi => line.verb === 'HI');

describe('what a winder says', () => {
	it('at a new link the birth line with the totals of now comes first', () =>
		withBoard(['--unlinked'], async (board) => {
			board.turns(30);
			expect((await board.mark()).lines).toEqual([]);
			board.order('link up');
			const { lines } = await board.mark();
			expect(lines[0]).toMatchObject({ verb: 'HI', f: 30, v: 0, dir: 1, ppr: 1, rep: 100, buf: 32, b });
			expect(lines[0]).not.toHaveProperty('pb');
		}));

	it('says how many lines it can keep as it was compiled', () =>
		withBoard(
			[],
			async (board) => {
				expect((await board.mark()).lines[0]).toMatchObject({ verb: 'HI', buf: 256 });
			},
			256
		));

	it('ten ticks a second turning, one a second standing', () =>
		withBoard([], async (board) => {
			board.wait(5000);
			const standing = (await board.mark()).lines.filter(isTick).map((tick) => tick.t);
			expect(standing).toEqual([1000, 2000, 3000, 4000, 5000]);
			board.turns(50, 100);
			const turning = (await board.mark()).lines.filter(isTick);
			expect(turning.length).toBeGreaterThanOrEqual(48);
			expect(turning.length).toBeLessThanOrEqual(52);
		}));

	it('numbers every line it keeps one after the other, and events among themselves', () =>
		withBoard([], async (board) => {
			for (let round = 0; round < 4; round++) {
				board.turns(6);
				board.wait(1500);
				board.order('button');
			}
			const { lines } = await board.mark();
			// Nothing is acknowledged here, so events come a second time: the first is looked at.
			const first = new Map(lines.filter((line) => isTick(line) || isEvent(line)).map((line) => [line.n, line]));
			expect([...first.keys()].sort((one, other) => one - other)).toEqual(
				Array.from({ length: first.size }, (_, at) => at + 1)
			);
			const events = [...first.values()].filter(isEvent).sort((one, other) => one.n - other.n);
			expect(events.map((event) => event.e)).toEqual(events.map((_, at) => at + 1));
		}));

	it('answers ? at once with the totals and the speed of now', () =>
		withBoard([], async (board) => {
			board.turns(12);
			await board.mark();
			board.say('?');
			expect((await board.mark()).lines[0]).toMatchObject({ verb: 'HI', f: 12, r: 600 });
		}));

	it('signs off', () =>
		withBoard([], async (board) => {
			board.order('bye');
			expect((await board.mark()).lines.at(-1)).toEqual({ verb: 'BYE', b });
		}));

	it('its clock of milliseconds wraps and ticks go on at their pace, kept ones with their own time', () =>
		withBoard(['--unlinked', '--clock-us', `${(2 ** 32 - 4000) * 1000}`], async (board) => {
			board.wait(9000);
			board.order('link up');
			board.wait(500);
			const { lines } = await board.mark();
			expect(lines.filter(isTick).map((tick) => tick.t)).toEqual(
				[5000, 4000, 3000, 2000, 1000, 0, -1000, -2000, -3000].map((t) => (t + 2 ** 32) % 2 ** 32)
			);
			expect(lines.filter(isTick).map((tick) => tick.n)).toEqual([9, 8, 7, 6, 5, 4, 3, 2, 1]);
		}));
});

describe('the ring', () => {
	it('frees an event by e alone, never by n', () =>
		withBoard([], async (board) => {
			board.order('button');
			board.turns(5);
			await board.mark();
			board.say({ verb: 'ACK', b, n: 5, e: 0 });
			board.order('link down');
			board.order('link up');
			board.wait(100);
			expect(kindsOf((await board.mark()).lines)).toEqual(['btn', 'go']);
			board.say({ verb: 'ACK', b, n: 5, e: 1 });
			board.order('link down');
			board.order('link up');
			board.wait(100);
			expect(kindsOf((await board.mark()).lines)).toEqual(['go']);
		}));

	it('frees ticks by n', () =>
		withBoard([], async (board) => {
			board.wait(10_000);
			expect((await board.mark()).kept).toBe(10);
			board.say({ verb: 'ACK', b, n: 7, e: 0 });
			expect((await board.mark()).kept).toBe(3);
		}));

	it('what was acknowledged of another boot, or of numbers never given, frees nothing', () =>
		withBoard([], async (board) => {
			board.order('button');
			board.wait(5000);
			const { kept } = await board.mark();
			board.say({ verb: 'ACK', b: '77AA01F3', n: 3, e: 1 });
			board.say({ verb: 'ACK', b, n: 500, e: 1 });
			board.say({ verb: 'ACK', b, n: 3, e: 5 });
			expect((await board.mark()).kept).toBe(kept);
		}));

	it('when it is full ticks within go first, evenly, and no event', () =>
		withBoard(['--unlinked'], async (board) => {
			for (let round = 0; round < 5; round++) {
				board.turns(200);
				board.order('button');
			}
			expect((await board.mark()).kept).toBe(32);
			board.order('link up');
			board.wait(1000);
			const { lines } = await board.mark();
			const events = lines.filter(isEvent);
			expect(kindsOf(events)).toEqual(['go', 'btn', 'btn', 'btn', 'btn', 'btn', 'stop']);
			const ticks = lines.filter(isTick).filter((tick) => tick.t <= 100_000);
			// 25 ticks are left of 1,000, over 100 s: old and new remain, and no stretch is empty.
			const times = ticks.map((tick) => tick.t).sort((one, other) => one - other);
			expect(times[0]).toBeLessThan(10_000);
			expect(times.at(-1)).toBeGreaterThan(98_000);
			expect(times.length).toBeGreaterThanOrEqual(24);
			expect(Math.max(...times.slice(1).map((t, at) => t - times[at]!))).toBeLessThan(15_000);
		}));

	it('after five hours without a link each tick still tells its own time', () =>
		withBoard(['--unlinked', '--step', '20'], async (board) => {
			board.wait(5 * 3_600_000);
			board.order('link up');
			board.wait(500);
			const ticks = (await board.mark()).lines.filter(isTick);
			expect(ticks.length).toBeGreaterThanOrEqual(10);
			// Standing it makes one a second, from the first second on.
			expect(ticks.map((tick) => tick.t)).toEqual(ticks.map((tick) => tick.n * 1000));
		}));

	it('when an event must go after all, a report of it stands in its place, once', () =>
		withBoard(['--unlinked'], async (board) => {
			for (let press = 0; press < 100; press++) board.order('button');
			board.order('link up');
			board.wait(1000);
			const { lines, kept } = await board.mark();
			expect(kept).toBe(32);
			const events = lines.filter(isEvent);
			expect(events.filter((event) => event.k === 'bufov')).toHaveLength(1);
			expect(events).toHaveLength(32);
			// 100 presses and one report: the newest are there.
			expect(events.at(-1)!.e).toBe(101);
		}));

	it('full of events it still tells the count, and uses no number twice', () =>
		withBoard([], async (board) => {
			for (let press = 0; press < 40; press++) board.order('button');
			await board.mark();
			board.turns(100);
			const { lines } = await board.mark();
			expect(lines.filter(isTick).at(-1)!.f).toBeGreaterThanOrEqual(99);
			const numbers = lines.filter(isTick).map((tick) => tick.n);
			expect(new Set(numbers).size).toBe(numbers.length);
			expect(numbers).toEqual([...numbers].sort((one, other) => one - other));
		}));

	it('sends events after a gap again when asked, and says what is gone', () =>
		withBoard([], async (board) => {
			for (let press = 0; press < 6; press++) board.order('button');
			await board.mark();
			board.say({ verb: 'ACK', b, n: 2, e: 2 });
			board.say({ verb: 'SYNC', b, e: 3 });
			board.wait(200);
			expect((await board.mark()).lines.filter(isEvent).map((event) => event.e)).toEqual([4, 5, 6]);
			board.say({ verb: 'SYNC', b, e: 1 });
			board.wait(200);
			const { lines } = await board.mark();
			expect(lines[0]).toEqual({ verb: 'NO', b, why: 'gone' });
			expect(lines.filter(isEvent).map((event) => event.e)).toEqual([3, 4, 5, 6]);
			board.say({ verb: 'SYNC', b, e: 6 });
			board.wait(200);
			expect((await board.mark()).lines).toEqual([]);
			board.say({ verb: 'SYNC', b: '77AA01F3', e: 1 });
			expect((await board.mark()).lines).toEqual([{ verb: 'NO', b, why: 'boot' }]);
		}));

	it('an event not acknowledged is sent again unasked, the same to the letter, until it is', () =>
		withBoard([], async (board) => {
			board.order('button');
			board.wait(20_000);
			const { texts } = await board.mark();
			const events = texts.filter((text) => text.startsWith('E '));
			expect(events.length).toBeGreaterThanOrEqual(5);
			expect(events.length).toBeLessThanOrEqual(11);
			expect(new Set(events).size).toBe(1);
			board.say({ verb: 'ACK', b, n: 1, e: 1 });
			board.wait(20_000);
			expect(kindsOf((await board.mark()).lines)).toEqual([]);
		}));
});

describe('at a new link', () => {
	it('totals of now, then events, then ticks, newest first and a second apart, live ones between', () =>
		withBoard(
			['--unlinked'],
			async (board) => {
				board.turns(150);
				board.wait(2000);
				board.turns(50);
				await board.mark();
				const at = board.nowMs;
				board.order('link up');
				board.turns(5);
				const { lines } = await board.mark();
				const replayed = lines.filter((line) => (isTick(line) || isEvent(line)) && line.t <= at) as (Tick | Event)[];
				const kinds = replayed.map((line) => line.verb).join('');
				expect(kinds).toMatch(/^E{3}T{10,}$/);
				const events = replayed.filter(isEvent).map((event) => event.e);
				expect(events).toEqual([1, 2, 3]);
				const times = replayed.filter(isTick).map((tick) => tick.t);
				for (const [i, t] of times.slice(1).entries()) expect(times[i]! - t).toBeGreaterThanOrEqual(1000);
				expect(lines.some((line) => isTick(line) && line.t > at)).toBe(true);
			},
			256
		));

	it('replays at most 200 lines a second', () =>
		withBoard(
			['--unlinked', '--step', '1'],
			async (board) => {
				for (let press = 0; press < 250; press++) board.order('button');
				board.order('link up');
				let sent = 0;
				for (let ms = 1; ms <= 1500; ms += 10) {
					board.wait(10);
					sent += (await board.mark()).lines.filter(isEvent).length;
					expect(sent).toBeLessThanOrEqual((ms + 10) * (replayLinesPerSecondMax / 1000) + 1);
				}
				expect(sent).toBeGreaterThanOrEqual(250);
			},
			256
		));

	it('while asked to hold there is no replay and one tick a second; events still go', () =>
		withBoard(['--unlinked'], async (board) => {
			board.turns(50);
			board.order('link up');
			board.say({ verb: 'HOLD', ms: 3000 });
			await board.mark();
			board.turns(25);
			board.order('button');
			const { lines } = await board.mark();
			expect(lines.filter(isTick).length).toBeLessThanOrEqual(3);
			expect(kindsOf(lines)).toEqual(['btn']);
			board.wait(1500);
			const { lines: after } = await board.mark();
			expect(kindsOf(after)).toContain('go');
		}));

	it('nothing is said without a link', () =>
		withBoard(['--unlinked'], async (board) => {
			board.turns(20);
			board.say('?');
			board.order('button');
			board.wait(5000);
			expect((await board.mark()).texts).toEqual([]);
		}));
});

describe('totals through resets', () => {
	const acknowledged = async (board: Board) => {
		const { lines, b: boot } = await board.mark();
		const last = lines.filter((line) => isTick(line) || isEvent(line)).at(-1)!;
		board.say({ verb: 'ACK', b: boot, n: last.n, e: last.e });
		await board.mark();
		return boot;
	};

	it('are continued from the boot the host knows, through boots it never heard of', () =>
		withBoard(['--retain'], async (board) => {
			board.turns(30);
			board.turns(4, 100, false);
			const known = await acknowledged(board);
			board.turns(5);
			board.order('reset');
			board.turns(7);
			board.turns(2, 100, false);
			const second = await board.mark();
			expect(hi(second.lines)[0]).toMatchObject({ pb: known, pf: 35, pv: 4 });
			expect(second.b).not.toBe(known);
			board.order('reset');
			const third = await board.mark();
			expect(hi(third.lines)[0]).toMatchObject({ n: 0, f: 0, v: 0, pb: known, pf: 42, pv: 6 });
			board.turns(3);
			const now = await acknowledged(board);
			board.order('reset');
			expect(hi((await board.mark()).lines)[0]).toMatchObject({ pb: now, pf: 3, pv: 0 });
		}));

	it('nothing is claimed where memory is lost, or where no host ever acknowledged anything', () =>
		withBoard(['--retain'], async (board) => {
			board.turns(30);
			board.order('reset');
			expect(hi((await board.mark()).lines).at(-1)).not.toHaveProperty('pb');
			board.turns(10);
			await acknowledged(board);
			board.order('power');
			expect(hi((await board.mark()).lines).at(-1)).not.toHaveProperty('pb');
		}));

	it('nothing is claimed by a winder without such memory', () =>
		withBoard([], async (board) => {
			board.turns(30);
			await acknowledged(board);
			board.order('reset');
			expect(hi((await board.mark()).lines).at(-1)).not.toHaveProperty('pb');
		}));
});

/** A host that loses lines both ways, acknowledges what it has without a gap and asks for what it misses. */
class LossyHost {
	readonly texts = new Map<number, string>();
	readonly events = new Map<number, Event>();
	readonly gone = new Set<number>();
	b = '';
	n = 0;
	e = 0;
	seenE = 0;
	f = 0;
	v = 0;

	take(line: DeviceLine, text: string): void {
		if (line.verb === 'NO' && line.why === 'gone') {
			// What lies between the acknowledged and the next event known is lost.
			for (let e = this.e + 1; e <= this.seenE && !this.events.has(e); e++) this.gone.add(e);
			this.contiguous();
		}
		if (line.verb !== 'HI' && !isTick(line) && !isEvent(line)) return;
		this.b = line.b;
		this.f = Math.max(this.f, line.f);
		this.v = Math.max(this.v, line.v);
		this.seenE = Math.max(this.seenE, line.e);
		if (line.verb === 'HI') return;
		expect(this.texts.get(line.n) ?? text).toBe(text);
		this.texts.set(line.n, text);
		this.n = Math.max(this.n, line.n);
		if (isEvent(line)) this.events.set(line.e, line);
		this.contiguous();
	}

	private contiguous(): void {
		while (this.events.has(this.e + 1) || this.gone.has(this.e + 1)) this.e++;
	}
}

describe('over a link that loses lines both ways', () => {
	const act = fc.oneof(
		{ weight: 4, arbitrary: fc.record({ do: fc.constant('turn' as const), count: fc.integer({ min: 1, max: 30 }) }) },
		{ weight: 1, arbitrary: fc.record({ do: fc.constant('back' as const), count: fc.integer({ min: 1, max: 6 }) }) },
		{ weight: 3, arbitrary: fc.record({ do: fc.constant('wait' as const), count: fc.integer({ min: 1, max: 30 }) }) },
		{ weight: 2, arbitrary: fc.record({ do: fc.constant('press' as const), count: fc.integer({ min: 1, max: 4 }) }) },
		{ weight: 1, arbitrary: fc.record({ do: fc.constant('down' as const), count: fc.constant(0) }) },
		{ weight: 2, arbitrary: fc.record({ do: fc.constant('up' as const), count: fc.constant(0) }) }
	);

	it('no event is forgotten, no number means two things, and the total is the turns made', async () => {
		await fc.assert(
			fc.asyncProperty(fc.array(act, { minLength: 5, maxLength: 40 }), fc.nat(1e6), async (acts, seed) =>
				withBoard([], async (board) => {
					const random = randomFrom(seed, 'link');
					const host = new LossyHost();
					let net = 0;
					const exchange = async (loss: number) => {
						const { lines, texts } = await board.mark();
						for (const [at, line] of lines.entries()) if (random() >= loss) host.take(line, texts[at]!);
						if (host.b === '' || random() < loss) return;
						board.say({ verb: 'ACK', b: host.b, n: host.n, e: host.e });
						if (host.seenE > host.e && random() >= loss) board.say({ verb: 'SYNC', b: host.b, e: host.e });
					};
					for (const { do: what, count } of acts) {
						if (what === 'turn' || what === 'back') {
							board.turns(count, 100, what === 'turn');
							net += what === 'turn' ? count : -count;
						} else if (what === 'wait') board.wait(count * 100);
						else if (what === 'press') for (let press = 0; press < count; press++) board.order('button');
						else board.order(`link ${what}`);
						await exchange(0.4);
					}
					board.order('link up');
					for (let round = 0; round < 12; round++) {
						board.wait(1000);
						await exchange(0);
					}
					const end = await board.mark();
					expect([host.f - host.v, end.net]).toEqual([net, net]);
					expect(host.e).toBe(host.seenE);
					// An event is lost only where the ring ran over, and then the report of it is there.
					const reported = [...host.events.values()].some((event) => event.k === 'bufov');
					if (host.gone.size > 0) expect(reported).toBe(true);
					expect([...board.events.values()].every((event) => event.e <= host.e)).toBe(true);
				})
			),
			{ numRuns: 25 }
		);
	});
});
