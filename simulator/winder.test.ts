import fc from 'fast-check';
import { describe, expect, it, vi } from 'vitest';
import { formatLine, parseDeviceLine } from '../src/lib/turnline/index.ts';
import type { CoilPlan, WinderConfig } from '../src/lib/winding/types.ts';
import {
	ackOf,
	commands,
	figuresOf,
	newWinder,
	passTime,
	takeCoil,
	takeLine,
	takeTap,
	viewOf
} from '../src/lib/winding/winder.ts';
import { ordinaryDevice, type DeviceTraits } from './device.ts';
import { inOutage, noFaults, Pipe, type FaultTraits } from './faults.ts';
import { calmMaker, onTargetTurns, type MakerTraits } from './maker.ts';
import { ordinarySensor, ordinarySpindle, type SensorTraits } from './physics.ts';
import { randomFrom } from './random.ts';
import { SimulatedWinder, type Mishap, type TruthEntry } from './winder.ts';

// Nothing here is about pace: a busy machine may take its time.
vi.setConfig({ testTimeout: 120_000 });

interface Play {
	seed: number;
	target?: number;
	direction?: CoilPlan['direction'];
	mishap?: Mishap | null;
	faults?: Partial<FaultTraits>;
	device?: Partial<DeviceTraits>;
	sensor?: Partial<SensorTraits>;
	maker?: Partial<MakerTraits>;
}

/** An evening of simulated time is more than any coil here takes. */
const simMsMax = 3_600_000;
const beatMs = 100;
const wallStart = 1_800_000_000_000;
const runId = '7b0d1c1e-5f4c-4c5b-9a58-0a4ad6f4b0c1';

/** One coil on a simulated winder, with the fold of the server behind a link, in one made-up clock. */
function play({ seed, target = 700, direction = 'counter-clockwise', mishap = null, ...more }: Play) {
	const device = { ...ordinaryDevice, ...more.device };
	const truth: TruthEntry[] = [];
	let restarted = false;
	const sim = new SimulatedWinder(
		{
			id: 'w-01',
			seed,
			bootSeed: seed,
			device,
			spindle: ordinarySpindle,
			sensor: { ...ordinarySensor, seesDirection: device.seesDirection, ...more.sensor },
			maker: { ...calmMaker, ...more.maker },
			mishap
		},
		(entry) => truth.push(entry),
		() => (restarted = true)
	);
	const faults = { ...noFaults, ...more.faults };
	const up = new Pipe(faults, randomFrom(seed, 'up'));
	const down = new Pipe(faults, randomFrom(seed, 'down'));
	const config: WinderConfig = {
		pulsesPerTurn: 1,
		rpmMax: 1200,
		seesDirection: device.seesDirection,
		forwardIs: 'counter-clockwise',
		easeEarlyTurns: 40,
		stopEarlyTurns: 3,
		timeScale: 1,
		keepAfterMs: null
	};
	const coil: CoilPlan = {
		coilId: '1f0c8f3a-0d6e-4a5b-8b9b-3f4f8f6f7a10',
		name: 'Bridge',
		note: '',
		target,
		lookEvery: 250,
		direction,
		topFaces: 'out',
		toleranceTurns: 2,
		firstLook: null,
		fullTurns: null
	};
	let state = takeCoil(newWinder(), config, { runId, plan: coil, sticker: 'A1' }, wallStart).state;
	const questions = new Set<string>();
	let linked = false;
	let taps = 0;
	const tap = (made: { kind: 'go-on' } | { kind: 'stopped' }, now: number) => {
		const id = `00000000-0000-4000-8000-${String(++taps).padStart(12, '0')}`;
		state = takeTap(state, config, { ...made, id, memberId: null }, now).state;
	};

	for (let ms = 0; ms < simMsMax; ms += beatMs) {
		const wall = wallStart + ms;
		const out = inOutage(faults, ms) || !sim.powered;
		if (out || restarted) {
			if (linked) sim.device.linkDown();
			up.clear();
			down.clear();
			linked = restarted = false;
		} else if (!linked) {
			linked = true;
			sim.device.linkUp(sim.nowMs);
		}
		sim.advance(ms);
		for (const text of linked ? sim.device.take(ms) : []) up.push(text, ms);
		let came = false;
		for (const text of up.due(ms)) {
			const parsed = parseDeviceLine(text);
			if (!parsed.ok || !parsed.line) continue;
			came = true;
			state = takeLine(state, config, parsed.line, wall).state;
		}
		state = passTime(state, config, wall).state;
		const question = state.run?.question;
		if (question) questions.add(question);
		if (question === 'restarted' && !sim.device.turning) tap({ kind: 'go-on' }, wall);
		if (question === 'did-you-stop' && sim.phase === 'refitting') tap({ kind: 'stopped' }, wall);
		const told = commands(state, config, wall, 'changed');
		state = told.state;
		const ack = came ? ackOf(state) : null;
		for (const line of [...told.lines, ...(ack ? [{ verb: 'ACK' as const, ...ack }] : [])])
			down.push(formatLine(line), ms);
		for (const text of down.due(ms)) if (sim.powered) sim.device.hear(text, ms);
		if (sim.coilsReached > 0 && sim.device.settled && !sim.device.turning && !inOutage(faults, ms)) break;
	}
	sim.finish();
	const view = viewOf(state, config, wallStart + sim.nowMs);
	return { sim, truth, view, figures: figuresOf(state, config, runId)!, questions: [...questions] };
}

const of = (truth: TruthEntry[], kind: TruthEntry['kind']) => truth.filter((entry) => entry.kind === kind);

describe('a coil on the simulated winder', () => {
	it('is wound to the target, with a stop at each look, and the bench counts what the spindle turned', () => {
		for (let seed = 1; seed <= 4; seed++) {
			const { sim, truth, view, figures } = play({ seed });
			expect(sim.coilsReached).toBe(1);
			expect(Math.abs(figures.turns - 700)).toBeLessThanOrEqual(onTargetTurns);
			expect(figures.turns).toBe(sim.device.turns);
			expect(Math.abs(figures.turns - sim.spindle.angleTurns)).toBeLessThanOrEqual(1);
			expect(sim.wireTurns).toBeCloseTo(sim.spindle.angleTurns, 6);
			expect(figures.looks.map((look) => look.mark)).toEqual([100, 250, 500]);
			for (const [at, look] of of(truth, 'look').entries())
				expect(Math.abs(look.turns! - [100, 250, 500][at]!)).toBeLessThan(15);
			expect(view.run?.state).toBe('on-count');
			expect(figures.faults).toEqual([]);
		}
	});

	it('wound the other way, and with turns taken back at looks, ends the same', () => {
		const { sim, truth, figures } = play({ seed: 3, direction: 'clockwise', maker: { takeBackChance: 1 } });
		expect(of(truth, 'take-back').length).toBeGreaterThanOrEqual(3);
		expect(sim.device.forward).toBeGreaterThan(0);
		expect(sim.spindle.angleTurns).toBeLessThan(-690);
		expect(figures.turns).toBe(sim.device.turns);
		expect(Math.abs(figures.turns - 700)).toBeLessThanOrEqual(onTargetTurns);
	});

	it('with one sensor ends on the target too', () => {
		const { sim, figures } = play({ seed: 4, device: { seesDirection: false }, sensor: { bounceChance: 0.02 } });
		expect(Math.abs(figures.turns - 700)).toBeLessThanOrEqual(onTargetTurns);
		expect(Math.abs(figures.turns - sim.spindle.angleTurns)).toBeLessThanOrEqual(1);
		expect(sim.device.reverse).toBe(0);
	});

	it('over any bad link the bench ends with the same count and every event acknowledged', () => {
		const chance = fc.double({ min: 0, max: 0.25, noNaN: true });
		const faults = fc.record({
			drop: chance,
			double: chance,
			reorder: chance,
			corrupt: chance,
			delayMs: fc.integer({ min: 0, max: 600 }),
			outages: fc.array(fc.record({ fromS: fc.integer({ min: 5, max: 100 }), forS: fc.integer({ min: 1, max: 40 }) }), {
				maxLength: 2
			})
		});
		fc.assert(
			fc.property(fc.integer({ min: 1, max: 1000 }), faults, fc.constantFrom(32, 256), (seed, faults, bufLines) => {
				const { sim, view, figures } = play({ seed, target: 420, faults, device: { bufLines } });
				expect(sim.coilsReached).toBe(1);
				expect(sim.device.settled).toBe(true);
				expect([view.forward, view.reverse]).toEqual([sim.device.forward, sim.device.reverse]);
				expect(figures.turns).toBe(sim.device.turns);
				expect(sim.boots[0]!.events.every((event) => event.acknowledged)).toBe(true);
			}),
			{ numRuns: 12 }
		);
	});
});

describe('mishaps', () => {
	it('a snapped wire runs empty until it is noticed, and the log tells the wire from the spindle', () => {
		const { sim, truth } = play({ seed: 2, mishap: 'snap' });
		expect(of(truth, 'snap')).toHaveLength(1);
		expect(of(truth, 'splice')).toHaveLength(1);
		const empty = sim.spindle.angleTurns - sim.wireTurns;
		expect(empty).toBeGreaterThan(2);
		expect(empty).toBeLessThan(40);
	});

	it('a magnet that fell off makes the bench ask whether the maker stopped, and the log holds what went unseen', () => {
		const { sim, truth, figures, questions } = play({ seed: 2, mishap: 'magnet' });
		expect(questions).toEqual(['did-you-stop']);
		const [off] = of(truth, 'magnet-off');
		const [on] = of(truth, 'magnet-on');
		const unseen = on!.revolutions - off!.revolutions;
		expect(unseen).toBeGreaterThan(5);
		expect(on!.forward - off!.forward).toBeLessThanOrEqual(1);
		expect(Math.abs(sim.spindle.angleTurns - unseen - figures.turns)).toBeLessThanOrEqual(2);
	});

	it('a restart makes a new boot that winds on under a new plan; what was not counted is within the bound', () => {
		const { sim, truth, figures, questions } = play({ seed: 2, mishap: 'restart' });
		expect(questions).toEqual(['restarted']);
		expect(sim.boots).toHaveLength(2);
		expect(new Set(sim.boots.map((boot) => boot.boot)).size).toBe(2);
		expect(Math.abs(figures.turns - 700)).toBeLessThanOrEqual(onTargetTurns);
		const counted = sim.boots.reduce((sum, boot) => sum + boot.forward - boot.reverse, 0);
		// What no line told before the reset is counted by nobody; a tick's worth at most.
		expect(counted - figures.turns).toBeGreaterThanOrEqual(0);
		expect(counted - figures.turns).toBeLessThanOrEqual(3);
		expect(sim.spindle.angleTurns - counted).toBeGreaterThan(1);
		expect(sim.spindle.angleTurns - counted).toBeLessThan(20);
		expect(of(truth, 'boot')).toHaveLength(2);
	});

	it('a restart with totals that survive needs no question', () => {
		const { questions, figures } = play({ seed: 2, mishap: 'restart', device: { retains: true } });
		expect(questions).toEqual([]);
		expect(Math.abs(figures.turns - 700)).toBeLessThanOrEqual(onTargetTurns);
	});
});

describe('the truth log', () => {
	it('is the same again for the same seed', () => {
		expect(play({ seed: 5, target: 300 }).truth).toEqual(play({ seed: 5, target: 300 }).truth);
		expect(play({ seed: 5, target: 300 }).truth).not.toEqual(play({ seed: 6, target: 300 }).truth);
	});

	it('tells the revolutions of the spindle itself at each entry, and ends with every boot and its events', () => {
		const angles: number[] = [];
		const sim: SimulatedWinder = new SimulatedWinder(
			{
				id: 'w-01',
				seed: 8,
				bootSeed: 8,
				device: ordinaryDevice,
				spindle: ordinarySpindle,
				sensor: ordinarySensor,
				maker: calmMaker,
				mishap: null
			},
			(entry) => {
				if (entry.simMs > 0) angles.push(Math.abs(entry.revolutions - sim.spindle.angleTurns));
			}
		);
		const { boot } = sim.device;
		sim.device.hear(formatLine({ verb: 'SET', id: 1, b: boot, tgt: 150, look: 0, ease: 40, stop: 3 }), 0);
		sim.advance(120_000);
		expect(angles.length).toBeGreaterThan(5);
		expect(Math.max(...angles)).toBeLessThanOrEqual(0.0005001);

		const { truth } = play({ seed: 5, target: 300 });
		const final = truth[truth.length - 1]!;
		expect(final.kind).toBe('final');
		const logged = of(truth, 'event').map((entry) => entry.detail);
		const boots = final.detail!.boots as { events: Record<string, unknown>[] }[];
		expect(boots.flatMap(({ events }) => events)).toEqual(logged.map((event) => ({ ...event, acknowledged: true })));
	});

	it('has a stop after every go, by the spindle itself', () => {
		const { truth } = play({ seed: 7 });
		const moves = truth.filter(({ kind }) => kind === 'go' || kind === 'stop').map(({ kind }) => kind);
		expect(moves.length).toBeGreaterThanOrEqual(8);
		expect(moves.every((kind, at) => kind === (at % 2 ? 'stop' : 'go'))).toBe(true);
	});
});

describe('the stop output', () => {
	it('takes the motor from under a foot that stays down', () => {
		const sim = new SimulatedWinder({
			id: 'w-01',
			seed: 3,
			bootSeed: 3,
			device: ordinaryDevice,
			spindle: ordinarySpindle,
			sensor: ordinarySensor,
			maker: calmMaker,
			mishap: null
		});
		const b = sim.device.boot;
		sim.device.hear(formatLine({ verb: 'SET', id: 1, b, tgt: 5000, look: 0, ease: 40, stop: 3 }), 0);
		sim.advance(15_000);
		const before = sim.spindle.rpm;
		expect(before).toBeGreaterThan(400);
		sim.device.hear(formatLine({ verb: 'STOP', id: 2, b }), sim.nowMs);
		sim.advance(16_000);
		expect(sim.phase).toBe('winding');
		expect(sim.spindle.rpm).toBeLessThan(before / 2);
	});
});
