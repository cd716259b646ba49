import fc from 'fast-check';
import { describe, expect, it, vi } from 'vitest';
import { Counter } from './counter.ts';
import { handsOff, ordinarySensor, ordinarySpindle, Sensor, Spindle, type Drive, type Edge } from './physics.ts';
import { randomFrom } from './random.ts';

// Nothing here is about pace: a busy machine may take its time.
vi.setConfig({ testTimeout: 120_000 });

const stepMs = 5;
const pedal = (share: number): Drive => ({ ...handsOff, pedal: share });
const hand = (rpm: number): Drive => ({ ...handsOff, handRpm: rpm });

/** Spindle, sensor and counter together. */
function rig(seed: number, sensorTraits: Partial<typeof ordinarySensor> = {}) {
	const traits = { ...ordinarySensor, ...sensorTraits };
	const spindle = new Spindle(ordinarySpindle, randomFrom(seed, 'spindle'));
	const sensor = new Sensor(traits, randomFrom(seed, 'sensor'));
	const counter = new Counter(traits.seesDirection, 1200, traits.pulsesPerTurn);
	const edges: Edge[] = [];
	let nowMs = 0;
	const counted = { forward: 0, reverse: 0 };
	return {
		spindle,
		sensor,
		counter,
		edges,
		counted,
		run(ms: number, drive: Drive) {
			for (const end = nowMs + ms; nowMs < end; nowMs += stepMs) {
				spindle.step(stepMs, drive);
				for (const edge of sensor.step(spindle.angleTurns, nowMs, nowMs + stepMs)) {
					edges.push(edge);
					const pulse = counter.take(edge);
					if (pulse === 1) counted.forward++;
					if (pulse === -1) counted.reverse++;
				}
			}
		}
	};
}

describe('the spindle', () => {
	it('gains speed under the pedal and coasts to a stand without it', () => {
		const { spindle, run } = rig(1);
		run(500, pedal(1));
		const early = spindle.rpm;
		run(3000, pedal(1));
		expect(early).toBeGreaterThan(0);
		expect(spindle.rpm).toBeGreaterThan(early);
		expect(spindle.rpm).toBeLessThan(ordinarySpindle.rpmTop * 1.1);
		const released = spindle.angleTurns;
		run(500, handsOff);
		expect(spindle.rpm).toBeGreaterThan(0);
		run(5000, handsOff);
		expect(spindle.rpm).toBe(0);
		expect(spindle.angleTurns).toBeGreaterThan(released + 1);
	});

	it('runs on farther from a higher speed', () => {
		const runOn = (share: number) => {
			const { spindle, run } = rig(2);
			run(4000, pedal(share));
			const released = spindle.angleTurns;
			run(5000, handsOff);
			return spindle.angleTurns - released;
		};
		expect(runOn(1)).toBeGreaterThan(runOn(0.5));
		expect(runOn(0.5)).toBeGreaterThan(runOn(0.1));
	});

	it('turns the other way when the motor is switched over, and under a hand', () => {
		const { spindle, run } = rig(3);
		run(2000, { pedal: 1, direction: -1, handRpm: null });
		expect(spindle.angleTurns).toBeLessThan(-1);
		run(4000, handsOff);
		const stood = spindle.angleTurns;
		run(3000, hand(60));
		expect(spindle.angleTurns).toBeGreaterThan(stood + 2);
	});

	it('does the same again for the same seed', () => {
		const path = (seed: number) => {
			const { spindle, edges, run } = rig(seed, { bounceChance: 0.1 });
			run(4000, pedal(0.8));
			run(4000, handsOff);
			return { angle: spindle.angleTurns, edges };
		};
		fc.assert(
			fc.property(fc.integer({ min: 0, max: 10_000 }), (seed) => {
				expect(path(seed)).toEqual(path(seed));
			}),
			{ numRuns: 5 }
		);
		expect(path(1).angle).not.toBe(path(2).angle);
	});
});

const moves = fc.array(
	fc.oneof(
		fc.record({
			kind: fc.constant('pedal' as const),
			ms: fc.integer({ min: 100, max: 4000 }),
			share: fc.double({ min: 0.05, max: 1, noNaN: true })
		}),
		fc.record({
			kind: fc.constant('hand' as const),
			ms: fc.integer({ min: 100, max: 4000 }),
			rpm: fc.integer({ min: -90, max: 90 })
		}),
		fc.record({ kind: fc.constant('off' as const), ms: fc.integer({ min: 100, max: 3000 }) })
	),
	{ maxLength: 8 }
);

describe('the sensor and its counter', () => {
	it('with two sensors the net of the turns is that of the spindle, however it was turned and however it bounced', () => {
		fc.assert(
			fc.property(fc.integer(), moves, fc.constantFrom(1, 2, 4), (seed, list, pulsesPerTurn) => {
				const { spindle, counted, run } = rig(seed, { pulsesPerTurn, bounceChance: 0.05 });
				for (const move of list) {
					if (move.kind === 'pedal') run(move.ms, pedal(move.share));
					else if (move.kind === 'hand') run(move.ms, hand(move.rpm));
					else run(move.ms, handsOff);
				}
				const net = (counted.forward - counted.reverse) / pulsesPerTurn;
				expect(Math.abs(net - spindle.angleTurns)).toBeLessThanOrEqual(1);
			}),
			{ numRuns: 40 }
		);
	});

	it('with one sensor the turns are those of the spindle forward, and bounces are refused and counted', () => {
		const { spindle, counted, counter, run } = rig(9, { seesDirection: false, bounceChance: 0.3 });
		run(20_000, pedal(0.9));
		run(5000, pedal(0.1));
		run(3000, handsOff);
		expect(Math.abs(counted.forward - spindle.angleTurns)).toBeLessThanOrEqual(1);
		expect(counted.reverse).toBe(0);
		expect(counter.refused).toBeGreaterThan(10);
	});

	it('a spindle rocked on the edge of a magnet counts nothing', () => {
		const { counted, edges, run } = rig(4);
		// To the middle of the turn, where the magnet is, and to and fro there.
		run(900, hand(30));
		const before = { ...counted };
		const edgesBefore = edges.length;
		for (let rock = 0; rock < 40; rock++) run(150, hand(rock % 2 ? 20 : -20));
		expect(edges.length).toBeGreaterThan(edgesBefore);
		expect(counted).toEqual(before);
	});

	it('when the magnet falls off at speed the edges end and the spindle goes on', () => {
		const { spindle, sensor, edges, counted, run } = rig(5);
		run(4000, pedal(1));
		sensor.fitMagnet(false);
		run(stepMs, pedal(1));
		const [edgesThen, turnsThen, rpmThen] = [edges.length, counted.forward, spindle.rpm];
		expect(rpmThen).toBeGreaterThan(500);
		const angleThen = spindle.angleTurns;
		run(2000, pedal(1));
		expect(edges.length).toBe(edgesThen);
		expect(counted.forward).toBe(turnsThen);
		expect(spindle.angleTurns).toBeGreaterThan(angleThen + 10);
		sensor.fitMagnet(true);
		run(2000, pedal(1));
		expect(counted.forward).toBeGreaterThan(turnsThen + 10);
	});

	it('a magnet that goes by unseen is missing from the count', () => {
		const { spindle, counted, run } = rig(6, { missChance: 0.2 });
		run(30_000, pedal(1));
		expect(counted.forward).toBeLessThan(spindle.angleTurns * 0.9);
		expect(counted.forward).toBeGreaterThan(spindle.angleTurns * 0.6);
	});
});
