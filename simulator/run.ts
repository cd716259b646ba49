import type { Carrier, CarrierEvents, CarrierTarget } from './carrier.ts';
import { openHttpCarrier } from './carrier-http.ts';
import { openWsCarrier } from './carrier-ws.ts';
import { ordinaryDevice, type DeviceTraits, type Retained } from './device.ts';
import { inOutage, noFaults, Pipe, type FaultTraits } from './faults.ts';
import type { MakerTraits, Span } from './maker.ts';
import { ordinarySensor, ordinarySpindle, type SensorTraits, type SpindleTraits } from './physics.ts';
import { randomFrom } from './random.ts';
import { scenarios, type ScenarioName } from './scenarios.ts';
import { SimulatedWinder, type TruthBoot, type TruthEntry } from './winder.ts';

/** Simulated winders on real carriers: the wall clock, multiplied, drives them. */

export interface WinderTarget {
	/** The winder's id at the server. */
	winder: string;
	linkKey: string;
	/** `dev` in its lines; `winder` without. */
	name?: string;
}

export interface SimulationOptions {
	/** Address of the server, such as http://127.0.0.1:4173. */
	server: string;
	winders: WinderTarget[];
	scenario?: ScenarioName;
	carrier?: 'ws' | 'http';
	/** Another way than these two, such as a cable. */
	openCarrier?: (target: CarrierTarget, events: CarrierEvents) => Carrier;
	/** Simulated time runs this many times faster than the wall clock; the winder's time scale at the server must be the same. */
	speedUp?: number;
	seed?: number;
	/** Each winder ends after so many coils; null: never. The scenario's own number without. */
	coils?: number | null;
	/** Laid over the faults of the scenario. */
	faults?: Partial<FaultTraits>;
	device?: Partial<Pick<DeviceTraits, 'pulsesPerTurn' | 'seesDirection' | 'bufLines' | 'retains'>>;
	spindle?: Partial<SpindleTraits>;
	sensor?: Partial<Pick<SensorTraits, 'bounceChance' | 'missChance'>>;
	maker?: Partial<MakerTraits>;
	/** What each winder's memory that survives held at the start, by its id. */
	memory?: Readonly<Record<string, Retained>>;
	/** Only for a server on loopback. */
	insecureTls?: boolean;
	/** Ends it politely. */
	signal?: AbortSignal;
	/** Takes each entry of the truth log, with its wall time (Unix ms). */
	truth?: (entry: TruthEntry & { at: number }) => void;
	/** Takes what happens, in plain words; `problem` is what needs somebody. */
	tell?: (text: string, problem: boolean) => void;
	/** Wall milliseconds to wait for acknowledgements once the coils are wound. */
	settleMsMax?: number;
}

export interface WinderResult {
	winder: string;
	coilsReached: number;
	boots: TruthBoot[];
	/** Events of boots that ended with them, or given up for room: nobody can acknowledge them. */
	eventsLost: number;
	/** Events of the last boot that still wait. */
	eventsWaiting: number;
	/** Revolutions of the spindle itself, signed, and those that laid wire. */
	revolutions: number;
	wireTurns: number;
}

export interface SimulationResult {
	winders: WinderResult[];
	/** Every event that could be acknowledged was. */
	allAcknowledged: boolean;
}

export interface Simulation {
	/** The winders as they are, to look at. */
	winders: readonly SimulatedWinder[];
	done: Promise<SimulationResult>;
	/** Says goodbye and ends; acknowledgements are awaited for `settleMsMax` milliseconds. */
	stop(settleMsMax?: number): Promise<SimulationResult>;
}

/** Wall milliseconds between two looks at the clock. */
const beatMs = 20;
/** A process that was held up for longer does not make up for it: the spindle stood still too. */
const leapMsMax = 1000;
const settleMs = { coils: 30_000, stop: 700 };

export const speedUpMax = 500;

/** Winds until the coils are done or the signal comes, and tells how it went. */
export function runSimulation(options: SimulationOptions): Promise<SimulationResult> {
	return startSimulation(options).done;
}

/** As `runSimulation`, with the winders at hand meanwhile. */
export function startSimulation(options: SimulationOptions): Simulation {
	const speedUp = options.speedUp ?? 1;
	if (!(speedUp >= 1 && speedUp <= speedUpMax)) throw new RangeError(`speed-up is 1 to ${speedUpMax}, not ${speedUp}`);
	const coils = options.coils === undefined ? scenarios[options.scenario ?? 'workshop'].coils : options.coils;
	const links = options.winders.map((target) => new Link(target, options, speedUp));

	const startedMs = performance.now();
	let wallMs = 0;
	let lastMs = startedMs;
	let settlingUntilMs: number | null = null;
	let finishing: Promise<SimulationResult> | null = null;
	let report: (result: SimulationResult) => void;
	const done = new Promise<SimulationResult>((resolve) => (report = resolve));

	const beat = () => {
		const now = performance.now();
		wallMs += Math.min(leapMsMax, now - lastMs);
		lastMs = now;
		for (const { sim } of links) sim.maker.resting = coils !== null && sim.coilsReached >= coils;
		for (const link of links) link.beat(wallMs);
		const wound = links.every(({ sim }) => sim.maker.resting && sim.spindle.standing);
		if (wound) settlingUntilMs ??= now + (options.settleMsMax ?? settleMs.coils);
		if (settlingUntilMs === null) return;
		// The stop of the last coil is an event too: only when the winder has noticed it, all have been raised.
		const settled = links.every((link) => link.sim.device.settled && !link.sim.device.turning);
		if (settled || now >= settlingUntilMs) void finish();
	};

	const finish = () => {
		finishing ??= (async () => {
			clearInterval(timer);
			options.signal?.removeEventListener('abort', aborted);
			await Promise.all(links.map((link) => link.close()));
			const winders = links.map((link) => link.result());
			const result = { winders, allAcknowledged: winders.every((winder) => winder.eventsWaiting === 0) };
			report(result);
			return result;
		})();
		return finishing;
	};

	const stop = (settleMsMax = settleMs.stop) => {
		const until = performance.now() + settleMsMax;
		settlingUntilMs = Math.min(settlingUntilMs ?? until, until);
		return done;
	};
	const aborted = () => void stop();

	const timer = setInterval(beat, beatMs);
	if (options.signal?.aborted) aborted();
	else options.signal?.addEventListener('abort', aborted);
	return { winders: links.map((link) => link.sim), done, stop };
}

/** One winder, its bad link and its carrier. */
class Link {
	readonly sim: SimulatedWinder;
	private readonly carrier: Carrier;
	private readonly faults: FaultTraits;
	private readonly up: Pipe;
	private readonly down: Pipe;
	private carrierUp = false;
	private inOutage = false;
	private restarting = false;
	private wallMs = 0;

	constructor(
		private readonly target: WinderTarget,
		private readonly options: SimulationOptions,
		private readonly speedUp: number
	) {
		const seed = options.seed ?? 1;
		const scenario = scenarios[options.scenario ?? 'workshop'];
		this.faults = { ...noFaults, ...scenario.faults, ...options.faults };
		this.up = new Pipe(this.faults, randomFrom(seed, target.winder, 'up'));
		this.down = new Pipe(this.faults, randomFrom(seed, target.winder, 'down'));
		const device: DeviceTraits = {
			...ordinaryDevice,
			...options.device,
			timeScale: speedUp,
			// A spindle geared faster needs a sensor that refuses less.
			rpmMax: Math.max(ordinaryDevice.rpmMax, 1.3 * (options.spindle?.rpmTop ?? 0)),
			...(target.name !== undefined && { name: target.name })
		};
		this.sim = new SimulatedWinder(
			{
				id: target.winder,
				// Two simulations of one seed must not both claim to be the same boot of the winder.
				bootSeed: Date.now() + performance.now(),
				seed,
				device,
				spindle: { ...ordinarySpindle, ...options.spindle },
				sensor: {
					...ordinarySensor,
					bounceChance: scenario.bounceChance,
					...options.sensor,
					pulsesPerTurn: device.pulsesPerTurn,
					seesDirection: device.seesDirection
				},
				maker: { ...scenario.maker, ...options.maker },
				mishap: scenario.mishap,
				found: options.memory?.[target.winder] ?? null
			},
			(entry) => options.truth?.({ ...entry, at: Date.now() }),
			() => this.restarts()
		);
		const open = options.openCarrier ?? (options.carrier === 'http' ? openHttpCarrier : openWsCarrier);
		this.carrier = open(this.carrierTarget(seed), {
			up: () => {
				this.carrierUp = true;
				this.sim.device.linkUp(this.sim.nowMs);
				this.tell('linked', false);
			},
			down: () => {
				this.carrierUp = false;
				this.sim.device.linkDown();
				this.up.clear();
				this.down.clear();
			},
			heard: (lines) => {
				for (const line of lines) if (line !== '') this.down.push(line, this.wallMs);
			},
			trouble: (text) => this.tell(text, true)
		});
	}

	/** The wall clock has gone on to this many milliseconds since the start. */
	beat(wallMs: number): void {
		this.wallMs = wallMs;
		this.playOutage();
		for (const text of this.down.due(wallMs)) if (this.sim.powered) this.sim.device.hear(text, this.sim.nowMs);
		this.sim.advance(wallMs * this.speedUp);
		if (this.restarting && this.sim.powered) {
			this.restarting = false;
			if (!this.inOutage) this.carrier.mend();
		}
		if (!this.carrierUp) return;
		for (const text of this.sim.device.take(this.sim.nowMs)) this.up.push(text, wallMs);
		const lines = this.up.due(wallMs);
		if (lines.length > 0) this.carrier.send(lines);
	}

	close(): Promise<void> {
		this.sim.finish();
		return this.carrier.close(this.sim.device.goodbye());
	}

	result(): WinderResult {
		return {
			winder: this.target.winder,
			coilsReached: this.sim.coilsReached,
			boots: this.sim.boots,
			eventsLost: this.sim.eventsLost,
			eventsWaiting: this.sim.device.ring.events.length,
			revolutions: this.sim.spindle.angleTurns,
			wireTurns: this.sim.wireTurns
		};
	}

	private carrierTarget(seed: number): CarrierTarget {
		const { server, insecureTls = false } = this.options;
		const url = new URL(server);
		if (insecureTls && !isLoopback(url.hostname)) throw new RangeError('insecureTls is for a server on loopback');
		return {
			server: url,
			winder: this.target.winder,
			linkKey: this.target.linkKey,
			insecureTls,
			random: randomFrom(seed, this.target.winder, 'carrier')
		};
	}

	private playOutage(): void {
		const now = inOutage(this.faults, this.wallMs);
		if (now === this.inOutage) return;
		this.inOutage = now;
		this.tell(now ? 'outage begins' : 'outage ends', false);
		if (now) this.carrier.cut();
		else if (!this.restarting) this.carrier.mend();
	}

	/** Without its supply the winder has no link either. */
	private restarts(): void {
		this.restarting = true;
		this.carrier.cut();
	}

	private tell(text: string, problem: boolean): void {
		this.options.tell?.(`${this.target.name ?? this.target.winder}: ${text}`, problem);
	}
}

/** Whether a host name can only be this machine. */
export function isLoopback(hostname: string): boolean {
	return hostname === 'localhost' || hostname === '[::1]' || /^127(\.\d{1,3}){3}$/.test(hostname);
}

/** Bounds around a middle, a fifth either way: a person is never exact. */
export function about(seconds: number): Span {
	return [seconds * 800, seconds * 1200];
}
