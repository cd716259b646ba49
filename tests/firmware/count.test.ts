import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { handsOff, ordinarySensor, ordinarySpindle, Sensor, Spindle, type Drive } from '../../simulator/physics.ts';
import { randomFrom } from '../../simulator/random.ts';
import { Board, isEvent, isTick, kindsOf, withBoard } from './board.ts';

/** A spindle with its magnets and sensors beside a board: edges of the physical model, at its times. */
class Bench {
	readonly spindle: Spindle;
	readonly sensor: Sensor;
	levels = 0;

	constructor(
		readonly board: Board,
		seed: number,
		sensor: Partial<typeof ordinarySensor> = {},
		private readonly stepMs = 4
	) {
		this.spindle = new Spindle({ ...ordinarySpindle, rpmTop: 900 }, randomFrom(seed, 'spindle'));
		this.sensor = new Sensor({ ...ordinarySensor, ...sensor }, randomFrom(seed, 'sensor'));
		this.sensor.step(0, 0, 0);
	}

	drive(ms: number, drive: Partial<Drive>): void {
		const from = this.board.nowMs;
		for (let at = this.stepMs; at <= ms; at += this.stepMs) this.step(from + at, drive);
		this.board.order('time');
	}

	/** Turns on slowly by hand until no magnet is near, and stands there. */
	rest(way: 1 | -1): void {
		// Magnets stand in the middle of the parts of a turn: near a whole turn none is within reach.
		const near = 0.1 / this.sensor.traits.pulsesPerTurn;
		const creep = () => this.step(this.board.nowMs + this.stepMs, { handRpm: way * 30 });
		while (this.spindle.rpm !== way * 30) creep();
		while (Math.abs(this.spindle.angleTurns - this.turns) > near) creep();
		while (!this.spindle.standing) this.step(this.board.nowMs + this.stepMs, { handRpm: 0 });
		this.board.wait(4000);
	}

	/** Whole turns of the bobbin, as a line painted on it would show. */
	get turns(): number {
		return Math.round(this.spindle.angleTurns) + 0;
	}

	private step(toMs: number, drive: Partial<Drive>): void {
		const fromMs = this.board.nowMs;
		this.spindle.step(this.stepMs, { ...handsOff, ...drive });
		for (const edge of this.sensor.step(this.spindle.angleTurns, fromMs, toMs)) {
			const bit = edge.channel === 'A' ? 1 : 2;
			this.levels = edge.on ? this.levels | bit : this.levels & ~bit;
			this.board.nowMs = Math.max(this.board.nowMs, edge.atMs);
			this.board.order(`levels ${this.levels}`);
		}
		this.board.nowMs = Math.max(this.board.nowMs, toMs);
	}
}

const hand = fc.record({ ms: fc.integer({ min: 100, max: 2500 }), rpm: fc.integer({ min: -600, max: 600 }) });

describe('the count of the core', () => {
	it('is the turns of the spindle, forward and back, whatever the sensor chatters', async () => {
		await fc.assert(
			fc.asyncProperty(
				fc.array(hand, { minLength: 1, maxLength: 8 }),
				fc.constantFrom(1, 1, 2, 5),
				fc.constantFrom(0, 0, 0.6),
				fc.nat(1e6),
				async (hands, ppr, bounceChance, seed) =>
					withBoard(['--ppr', `${ppr}`, '--rpm-max', '1200'], async (board) => {
						const bench = new Bench(board, seed, { pulsesPerTurn: ppr, bounceChance });
						for (const { ms, rpm } of hands) bench.drive(ms, { handRpm: rpm });
						bench.rest(hands.at(-1)!.rpm < 0 ? -1 : 1);
						const { net, f, v } = await board.mark();
						expect(net).toBe(bench.turns);
						// Neither total runs away from what the spindle went.
						expect(f + v).toBeLessThanOrEqual(Math.ceil(bench.spindle.pathTurns) + hands.length + 1);
					})
			),
			{ numRuns: 25 }
		);
	});

	it('with one sensor is the turns of a spindle that goes one way, whatever the sensor chatters', async () => {
		await fc.assert(
			fc.asyncProperty(
				fc.array(fc.record({ ms: fc.integer({ min: 200, max: 3000 }), pedal: fc.integer({ min: 0, max: 10 }) }), {
					minLength: 1,
					maxLength: 6
				}),
				fc.constantFrom(0, 0.6),
				fc.nat(1e6),
				async (pedals, bounceChance, seed) =>
					withBoard(['--one-sensor', '--rpm-max', '1200'], async (board) => {
						const bench = new Bench(board, seed, { seesDirection: false, bounceChance });
						for (const { ms, pedal } of pedals) bench.drive(ms, { pedal: pedal / 10 });
						bench.rest(1);
						const { net, v } = await board.mark();
						expect([net, v]).toEqual([bench.turns, 0]);
					})
			),
			{ numRuns: 20 }
		);
	});

	it('refused, bouncing pulses are told apart, and the count is right', () =>
		withBoard([], async (board) => {
			const bench = new Bench(board, 7, { bounceChance: 1 });
			bench.drive(8000, { pedal: 0.8 });
			bench.rest(1);
			const { net, lines } = await board.mark();
			expect(net).toBe(bench.turns);
			expect(lines.filter(isTick).at(-1)!.x).toBeGreaterThan(20);
		}));

	it('a spindle rocked on the edge of a magnet counts nothing', () =>
		withBoard([], async (board) => {
			for (let rock = 0; rock < 20; rock++) {
				for (const levels of [1, 3, 1, 0, 1, 0, 2, 3, 2, 0]) {
					board.nowMs += 7;
					board.order(`levels ${levels}`);
				}
			}
			board.wait(3000);
			const { f, v, lines } = await board.mark();
			expect([f, v]).toEqual([0, 0]);
			expect(lines.filter(isEvent)).toEqual([]);
			// Rocked by hand it does not bounce: nobody is told to look for a fault in the wiring.
			expect(lines.filter(isTick).at(-1)!.x).toBeUndefined();
		}));

	it('a passage that began before the start does not count', () =>
		withBoard([], async (board) => {
			board.order('levels 3');
			board.wait(100);
			board.order('reset');
			for (const levels of [2, 0]) {
				board.nowMs += 10;
				board.order(`levels ${levels}`);
			}
			board.turns(3);
			const { f, v } = await board.mark();
			expect([f, v]).toEqual([3, 0]);
		}));

	it('a change missed between two looks at the pins loses no turn', () =>
		withBoard([], async (board) => {
			for (const order of [
				[1, 2, 0],
				[3, 2, 0],
				[1, 3, 0],
				[2, 1, 0]
			])
				for (const levels of order) {
					board.nowMs += 20;
					board.order(`levels ${levels}`);
				}
			const { f, v } = await board.mark();
			expect([f, v]).toEqual([3, 1]);
		}));

	it('several magnets make one turn, and rocking over one of them makes none', () =>
		withBoard(['--ppr', '4'], async (board) => {
			board.turns(10, 25);
			expect(await board.mark()).toMatchObject({ f: 2, v: 0 });
			for (let rock = 0; rock < 10; rock++) {
				board.turn(25, false);
				board.turn(25, true);
			}
			expect(await board.mark()).toMatchObject({ f: 2, v: 0 });
			board.turns(10, 25, false);
			expect(await board.mark()).toMatchObject({ f: 2, v: 2 });
		}));

	it('its clock of microseconds wraps and nothing is lost or taken for bouncing', () =>
		withBoard(['--clock-us', `${2 ** 32 - 3_000_000}`, '--one-sensor'], async (board) => {
			for (let turn = 0; turn < 60; turn++) {
				for (const levels of [1, 0]) {
					board.nowMs += 50;
					board.order(`levels ${levels}`);
				}
			}
			board.wait(1);
			const { f, lines } = await board.mark();
			expect(f).toBe(60);
			const speeds = lines.filter(isTick).map((tick) => tick.r);
			expect(new Set(speeds.filter((r) => r > 0))).toEqual(new Set([600]));
			expect(lines.filter(isTick).at(-1)).not.toHaveProperty('x');
		}));

	it('pulses closer than half the shortest period are refused and told apart', () =>
		withBoard(['--one-sensor', '--rpm-max', '1200'], async (board) => {
			// At 1,200 a turn takes 50 ms: 24 ms is too close, 26 ms is not.
			for (const ms of [24, 24, 26, 26]) {
				board.order('levels 1');
				board.nowMs += ms / 2;
				board.order('levels 0');
				board.nowMs += ms / 2;
			}
			board.wait(1500);
			const { f, lines } = await board.mark();
			expect([f, lines.filter(isTick).at(-1)!.x]).toEqual([3, 1]);
		}));

	it('after a long stand no wrap of that clock takes the first pulse for bouncing', () =>
		withBoard(['--one-sensor', '--step', '20'], async (board) => {
			board.order('levels 1');
			board.wait(50);
			board.order('levels 0');
			// The clock of 32 bits says again what it said at the pulse before, and 5 ms.
			board.nowMs += 2 ** 32 / 1000 - 45;
			board.order('levels 1');
			board.wait(1);
			expect((await board.mark()).f).toBe(2);
		}));

	it('a magnet missed at a steady speed is suspected and not added', () =>
		withBoard([], async (board) => {
			board.turns(10, 100);
			board.turn(200);
			board.turns(10, 100);
			const { f, lines } = await board.mark();
			expect(f).toBe(21);
			expect(lines.filter(isTick).at(-1)!.g).toBe(1);
		}));

	it('slowing down is not suspected', () =>
		withBoard([], async (board) => {
			for (let periodMs = 60; periodMs < 1200; periodMs *= 1.15) board.turn(periodMs);
			const { lines } = await board.mark();
			expect(lines.filter(isTick).at(-1)).not.toHaveProperty('g');
		}));
});

describe('the speed', () => {
	it.each([60, 600, 1150])('is told in signed revolutions a minute: %i', (rpm) =>
		withBoard([], async (board) => {
			board.turns(8, 60_000 / rpm);
			const there = (await board.mark()).lines.filter(isTick).at(-1)!.r;
			board.turns(8, 60_000 / rpm, false);
			const back = (await board.mark()).lines.filter(isTick).at(-1)!.r;
			// Edges are told in whole microseconds.
			expect([Math.abs(there - rpm), Math.abs(back + rpm)].every((off) => off <= 1)).toBe(true);
		})
	);

	it('is 0 again once the spindle stands', () =>
		withBoard([], async (board) => {
			board.turns(5);
			board.wait(3000);
			expect((await board.mark()).lines.filter(isTick).at(-1)!.r).toBe(0);
		}));
});

describe('go, stop and rev', () => {
	it('go carries the totals it stood at, stop those it stands at', () =>
		withBoard([], async (board) => {
			board.turns(10);
			board.wait(450);
			expect(kindsOf((await board.mark()).lines)).toEqual(['go']);
			board.wait(100);
			board.turns(2);
			const { lines } = await board.mark();
			expect(lines.filter(isEvent).map(({ k, f }) => [k, f])).toEqual([
				['stop', 10],
				['go', 10]
			]);
		}));

	it('a slow spindle is waited for three of its turns, three seconds at most', () =>
		withBoard([], async (board) => {
			board.turns(5, 900);
			board.wait(2600);
			expect(kindsOf((await board.mark()).lines)).not.toContain('stop');
			board.wait(200);
			expect(kindsOf((await board.mark()).lines)).toContain('stop');
		}));

	it('rev comes when the way changes while turning, not when it starts the other way', () =>
		withBoard([], async (board) => {
			board.turns(3);
			board.turns(3, 100, false);
			board.wait(3000);
			board.turns(3);
			expect(kindsOf((await board.mark()).lines)).toEqual(['go', 'rev', 'stop', 'go']);
		}));

	it('one sensor sees no way: everything is forward', () =>
		withBoard(['--one-sensor'], async (board) => {
			board.turns(3);
			board.turns(3, 100, false);
			const { f, v, lines } = await board.mark();
			expect([f, v]).toEqual([6, 0]);
			expect(lines[0]).toMatchObject({ verb: 'HI', dir: 0 });
			expect(kindsOf(lines)).toEqual(['go']);
		}));
});
