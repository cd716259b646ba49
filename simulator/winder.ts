import type { Event } from '../src/lib/turnline/index.ts';
import { Device, type DeviceTraits, type Retained } from './device.ts';
import { Maker, type MakerTraits, type Phase } from './maker.ts';
import { handsOff, Sensor, Spindle, stepMsMax, type SensorTraits, type SpindleTraits } from './physics.ts';
import { between, randomFrom, type Random } from './random.ts';

/** One winder with its maker: spindle, sensor, firmware and hands in one clock of simulated milliseconds. */

/** What goes wrong in the first coil, at a share of it drawn from the seed. */
export type Mishap = 'restart' | 'snap' | 'magnet';

export interface WinderTraits {
	id: string;
	seed: number;
	/** Boot ids come from a seed of their own: they must differ even where everything else is played again. */
	bootSeed: number;
	device: DeviceTraits;
	spindle: SpindleTraits;
	sensor: SensorTraits;
	maker: MakerTraits;
	mishap: Mishap | null;
	/** What memory that survives held at the start. */
	found?: Retained | null;
}

export const truthKinds = [
	'boot',
	'restart', // the microcontroller lost its supply; `lost`: events never heard of
	'plan', // a SET was taken
	'start', // the maker begins a coil
	'go', // the spindle itself begins to move
	'stop', // the spindle itself stands
	'look', // the maker stands for a look
	'take-back',
	'reached', // the maker is done with the coil
	'snap',
	'splice',
	'magnet-off',
	'magnet-on',
	'event', // the firmware numbered an event
	'acknowledged', // events freed by the host
	'event-lost', // given up for room
	'final'
] as const;
export type TruthKind = (typeof truthKinds)[number];

/** An event as the truth log tells it. */
export interface TruthEvent {
	n: number;
	e: number;
	k: string;
	f: number;
	v: number;
	t: number;
	acknowledged: boolean;
}

export interface TruthBoot {
	boot: string;
	/** Totals at the end of the boot, or now. */
	forward: number;
	reverse: number;
	events: TruthEvent[];
}

/** One line of the truth log. Turns are revolutions of the spindle itself, whatever the sensor saw. */
export interface TruthEntry {
	winder: string;
	kind: TruthKind;
	/** Simulated milliseconds since the simulation began. */
	simMs: number;
	/** Signed revolutions since the simulation began. */
	revolutions: number;
	/** Signed revolutions that laid wire. */
	wireTurns: number;
	boot: string;
	/** What the firmware has counted in this boot. */
	forward: number;
	reverse: number;
	/** Turns of the coil by the firmware's count, null without a plan. */
	turns: number | null;
	detail?: Record<string, unknown>;
}

/** An idle winder needs no fine steps. */
const idleStepMs = 20;
/** Share of the first coil at which a mishap comes. */
const mishapShare = [0.3, 0.6] as const;
/** How long a microcontroller takes to count again. */
const deadMs = [300, 800] as const;

export class SimulatedWinder {
	readonly spindle: Spindle;
	readonly device: Device;
	readonly maker: Maker;
	/** Revolutions that laid wire, signed. */
	wireTurns = 0;
	coilsReached = 0;
	/** Events that no one can have: of boots that ended, or given up for room. */
	eventsLost = 0;
	readonly boots: TruthBoot[] = [];

	private readonly sensor: Sensor;
	private readonly chance: Random;
	private simMs = 0;
	private wireOn = true;
	private mishapAt: number;
	private mishapDone = false;
	private deadUntilMs: number | null = null;
	private wasTurning = false;

	/**
	 * @param tell takes each entry of the truth log
	 * @param restarted the microcontroller has started again: its link is gone
	 */
	constructor(
		readonly traits: WinderTraits,
		private readonly tell: (entry: TruthEntry) => void = () => {},
		private readonly restarted: () => void = () => {}
	) {
		const stream = (part: string) => randomFrom(traits.seed, traits.id, part);
		this.chance = stream('mishap');
		this.mishapAt = between(this.chance, ...mishapShare);
		this.spindle = new Spindle(traits.spindle, stream('spindle'));
		this.sensor = new Sensor(traits.sensor, stream('sensor'));
		this.maker = new Maker(traits.maker, stream('maker'));
		this.device = new Device(
			traits.device,
			randomFrom(traits.bootSeed, traits.id, 'boot'),
			0,
			{
				event: (line) => this.eventMade(line),
				acknowledged: (events) => this.eventsFreed(events),
				lost: (line) => {
					this.eventsLost++;
					this.log('event-lost', { e: line.e, k: line.k });
				},
				plan: ({ set }) => this.log('plan', { ...set })
			},
			traits.found
		);
		this.bootBegins();
	}

	get nowMs(): number {
		return this.simMs;
	}

	get phase(): Phase {
		return this.maker.phase;
	}

	/** Counts again after a restart, so that it can have a link. */
	get powered(): boolean {
		return this.deadUntilMs === null;
	}

	/** Goes on to a time, in steps. */
	advance(toMs: number): void {
		while (this.simMs < toMs) {
			const still = this.spindle.standing && (this.maker.phase === 'waiting' || this.maker.phase === 'preparing');
			this.step(Math.min(still ? idleStepMs : stepMsMax, toMs - this.simMs));
		}
	}

	/** The boots with their events, and which of them were acknowledged; also the last line of the truth log. */
	finish(): TruthBoot[] {
		this.noteTotals();
		this.log('final', { boots: this.boots, eventsLost: this.eventsLost, coilsReached: this.coilsReached });
		return this.boots;
	}

	private step(stepMs: number): void {
		const { device, spindle } = this;
		const fromMs = this.simMs;
		const toMs = fromMs + stepMs;
		const plan = this.powered ? device.plan : null;
		const drive = this.maker.step(fromMs, {
			planKey: plan && `${plan.set.b} ${plan.from} ${plan.set.tgt}`,
			sign: plan?.sign ?? 1,
			cues: plan && device.cues,
			displayTurning: this.powered && device.turning,
			spindleTurning: !spindle.standing,
			spindleTurns: spindle.angleTurns,
			wireOn: this.wireOn,
			seesDirection: this.traits.device.seesDirection
		});
		const before = spindle.angleTurns;
		// A motor cut by the stop output coasts, whatever the foot does; a hand is not cut.
		const cut = device.motorReleased(fromMs) && drive.handRpm === null;
		spindle.step(stepMs, cut ? handsOff : drive);
		if (this.wireOn) this.wireTurns += spindle.angleTurns - before;
		const edges = this.sensor.step(spindle.angleTurns, fromMs, toMs);
		this.simMs = toMs;
		if (this.powered) {
			for (const edge of edges) device.edge(edge);
			device.pass(toMs);
		} else if (toMs >= this.deadUntilMs!) this.powerUp();
		this.noteMoves();
		for (const act of this.maker.takeActs()) this.acted(act);
		if (!this.mishapDone && this.traits.mishap) this.mishap();
	}

	private noteMoves(): void {
		const turning = !this.spindle.standing;
		if (turning === this.wasTurning) return;
		this.wasTurning = turning;
		this.log(turning ? 'go' : 'stop');
	}

	private acted(act: ReturnType<Maker['takeActs']>[number]): void {
		if (act === 'splice') this.wireOn = true;
		if (act === 'refit') {
			this.sensor.fitMagnet(true);
			this.log('magnet-on');
			return;
		}
		if (act === 'reached') this.coilsReached++;
		this.log(act);
	}

	private mishap(): void {
		const plan = this.device.plan;
		const turns = this.device.turns;
		if (!plan || turns === null || this.coilsReached > 0 || turns < plan.cue.target * this.mishapAt) return;
		// Each of them belongs to a spindle at speed.
		if (Math.abs(this.spindle.rpm) < this.traits.spindle.rpmTop / 2) return;
		this.mishapDone = true;
		if (this.traits.mishap === 'snap') {
			this.wireOn = false;
			this.log('snap');
		} else if (this.traits.mishap === 'magnet') {
			this.sensor.fitMagnet(false);
			this.log('magnet-off');
		} else this.powerFails();
	}

	private powerFails(): void {
		this.noteTotals();
		this.deadUntilMs = this.simMs + between(this.chance, ...deadMs);
		const unheard = this.device.ring.events.map((kept) => kept.line.e);
		this.log('restart', { lost: unheard, forMs: Math.round(this.deadUntilMs - this.simMs) });
		this.device.linkDown();
		this.restarted();
	}

	private powerUp(): void {
		this.deadUntilMs = null;
		this.eventsLost += this.device.restart(this.simMs).length;
		this.bootBegins();
	}

	private bootBegins(): void {
		this.boots.push({ boot: this.device.boot, forward: 0, reverse: 0, events: [] });
		this.log('boot');
	}

	private noteTotals(): void {
		const boot = this.boots[this.boots.length - 1]!;
		boot.forward = this.device.forward;
		boot.reverse = this.device.reverse;
	}

	private eventMade(line: Event): void {
		const { n, e, k, f, v, t } = line;
		this.boots[this.boots.length - 1]!.events.push({ n, e, k, f, v, t, acknowledged: false });
		this.log('event', { n, e, k, f, v, t });
	}

	private eventsFreed(lines: Event[]): void {
		const events = this.boots[this.boots.length - 1]!.events;
		for (const { e } of lines) events[e - 1]!.acknowledged = true;
		this.log('acknowledged', { e: lines.map((line) => line.e) });
	}

	private log(kind: TruthKind, detail?: Record<string, unknown>): void {
		const round = (turns: number) => Math.round(turns * 1000) / 1000;
		this.tell({
			winder: this.traits.id,
			kind,
			simMs: Math.round(this.simMs),
			revolutions: round(this.spindle.angleTurns),
			wireTurns: round(this.wireTurns),
			boot: this.device.boot,
			forward: this.device.forward,
			reverse: this.device.reverse,
			turns: this.device.turns,
			...(detail && { detail })
		});
	}
}
