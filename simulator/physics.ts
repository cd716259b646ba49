import type { Random } from './random.ts';

/**
 * The spindle, its motor and the sensor beside it. Pure: time comes in steps of simulated milliseconds, chance from a
 * seeded generator. Angles are revolutions of the bobbin since the simulation began, signed; speeds are signed rpm.
 */

/** The longest step that still draws a ramp smoothly and places an edge within a millisecond or two. */
export const stepMsMax = 5;

export interface SpindleTraits {
	/** Speed with the pedal all the way down. */
	rpmTop: number;
	/** How fast the motor gains speed. */
	rampRpmPerS: number;
	/** Dry friction: the same at every speed; it is what brings a slow spindle to a stand. */
	frictionRpmPerS: number;
	/** Drag that grows with speed, as a share of the speed lost in a second. */
	dragPerS: number;
	/** How far the speed wanders around what the pedal asks for, as a share. */
	wobble: number;
}

export const ordinarySpindle: SpindleTraits = {
	rpmTop: 720,
	rampRpmPerS: 420,
	frictionRpmPerS: 260,
	dragPerS: 0.9,
	wobble: 0.03
};

/** What hands and foot do to the spindle at a moment. */
export interface Drive {
	/** 0 up, 1 all the way down. */
	pedal: number;
	/** Which way the motor is switched. */
	direction: 1 | -1;
	/** A hand on the spindle turns it at this speed, signed; null: no hand. A hand overrules the motor. */
	handRpm: number | null;
}

export const handsOff: Drive = { pedal: 0, direction: 1, handRpm: null };

/** A hand takes the spindle along this quickly. */
const handRpmPerS = 900;
/** The wandering of the speed has forgotten itself after about this long. */
const wobbleMemoryMs = 700;

export class Spindle {
	/** Revolutions since the simulation began. */
	angleTurns = 0;
	rpm = 0;
	/** Revolutions in either direction together: what a mileage counter would show. */
	pathTurns = 0;

	private wander = 0;

	constructor(
		readonly traits: SpindleTraits,
		private readonly random: Random
	) {}

	/** One step of at most `stepMsMax` while anything moves. */
	step(stepMs: number, drive: Drive): void {
		const seconds = stepMs / 1000;
		const before = this.rpm;
		if (drive.handRpm !== null) this.rpm = towards(this.rpm, drive.handRpm, handRpmPerS * seconds);
		else if (drive.pedal > 0) this.underPower(seconds, stepMs, drive);
		else this.coast(seconds, 0);
		// Trapezoid: the mean of both ends, so that a ramp is followed exactly.
		const turns = ((before + this.rpm) / 2 / 60) * seconds;
		this.angleTurns += turns;
		this.pathTurns += Math.abs(turns);
	}

	get standing(): boolean {
		return this.rpm === 0;
	}

	private underPower(seconds: number, stepMs: number, drive: Drive): void {
		const keep = Math.exp(-stepMs / wobbleMemoryMs);
		this.wander = this.wander * keep + (this.random() * 2 - 1) * Math.sqrt(3 * (1 - keep * keep));
		const wanted =
			drive.direction * Math.min(1, drive.pedal) * this.traits.rpmTop * (1 + this.traits.wobble * this.wander);
		const gaining = Math.abs(this.rpm) < Math.abs(wanted) || Math.sign(this.rpm) === -Math.sign(wanted);
		if (gaining) this.rpm = towards(this.rpm, wanted, this.traits.rampRpmPerS * seconds);
		else this.coast(seconds, wanted);
	}

	/** The motor of a pedal winder does not brake: less pedal means coasting down to the lower speed. */
	private coast(seconds: number, downTo: number): void {
		const loss = (this.traits.frictionRpmPerS + this.traits.dragPerS * Math.abs(this.rpm)) * seconds;
		this.rpm = towards(this.rpm, downTo, loss);
	}
}

function towards(from: number, to: number, most: number): number {
	return from < to ? Math.min(to, from + most) : Math.max(to, from - most);
}

export type Channel = 'A' | 'B';

/** A sensor's output changes. */
export interface Edge {
	atMs: number;
	channel: Channel;
	on: boolean;
}

export interface SensorTraits {
	/** Magnets on the spindle. */
	pulsesPerTurn: number;
	/** Two sensors side by side tell the direction; one does not. */
	seesDirection: boolean;
	/** Chance that a change of the output chatters. */
	bounceChance: number;
	/** Chance that one passing magnet goes unnoticed. */
	missChance: number;
}

export const ordinarySensor: SensorTraits = { pulsesPerTurn: 1, seesDirection: true, bounceChance: 0, missChance: 0 };

/** The longest chatter of an output. */
const bounceMsMax = 1.2;

/**
 * One or two sensors beside the spindle and the magnets that pass them. A sensor switches on nearer than it switches
 * off, so a spindle trembling at the edge of a magnet's reach does not chatter. The second sensor sits half a magnet's
 * reach further on: going forward A comes before B.
 */
export class Sensor {
	private readonly reachTurns: number;
	private readonly slackTurns: number;
	private readonly on: Record<Channel, boolean> = { A: false, B: false };
	private magnetFitted = true;
	/** A magnet is within reach of a sensor, seen or not; whether it is seen is decided once. */
	private near = false;
	private unseen = false;
	private angleTurns: number | null = null;

	constructor(
		readonly traits: SensorTraits,
		private readonly random: Random
	) {
		this.reachTurns = Math.min(0.06, 0.18 / traits.pulsesPerTurn);
		this.slackTurns = this.reachTurns / 6;
	}

	/** The magnet falls off, or is fitted again. Edges that this causes come with the next step. */
	fitMagnet(fitted: boolean): void {
		this.magnetFitted = fitted;
	}

	/**
	 * The edges while the spindle went on to `angleTurns`, in order of time.
	 *
	 * @param fromMs simulated time at the beginning of the step, at the angle of the step before
	 * @param toMs simulated time at its end
	 */
	step(angleTurns: number, fromMs: number, toMs: number): Edge[] {
		const before = this.angleTurns ?? angleTurns;
		this.angleTurns = angleTurns;
		const edges: Edge[] = [];
		if (before === angleTurns && this.magnetFitted) return edges;
		// Half a reach is the least distance between two changes, so at this fineness no two fall into one part.
		const parts = Math.max(1, Math.ceil(Math.abs(angleTurns - before) / (this.reachTurns / 2)));
		for (let part = 1; part <= parts; part++) {
			const share = part / parts;
			this.look(before + (angleTurns - before) * share, fromMs + (toMs - fromMs) * share, edges);
		}
		return edges.sort((one, other) => one.atMs - other.atMs);
	}

	private look(angle: number, atMs: number, edges: Edge[]): void {
		const channels: Channel[] = this.traits.seesDirection ? ['A', 'B'] : ['A'];
		const distances = channels.map((channel) => this.distance(angle, channel === 'A' ? 0 : this.reachTurns));
		const near = Math.min(...distances) <= this.reachTurns + this.slackTurns;
		if (near && !this.near) this.unseen = this.random() < this.traits.missChance;
		this.near = near;
		for (const [at, channel] of channels.entries()) {
			const reach = this.on[channel] ? this.reachTurns + this.slackTurns : this.reachTurns;
			const on = distances[at]! <= reach && this.magnetFitted && !this.unseen;
			if (on === this.on[channel]) continue;
			this.on[channel] = on;
			edges.push({ atMs, channel, on });
			if (this.traits.bounceChance > 0 && this.random() < this.traits.bounceChance)
				this.chatter(channel, on, atMs, edges);
		}
	}

	private chatter(channel: Channel, on: boolean, atMs: number, edges: Edge[]): void {
		let at = atMs;
		const pairs = 1 + Math.floor(this.random() * 3);
		for (let pair = 0; pair < pairs; pair++) {
			at += (this.random() * bounceMsMax) / pairs / 2;
			edges.push({ atMs: at, channel, on: !on });
			at += (this.random() * bounceMsMax) / pairs / 2;
			edges.push({ atMs: at, channel, on });
		}
	}

	/** How far the nearest magnet is from a sensor; magnets stand in the middle of equal parts of the turn. */
	private distance(angle: number, offset: number): number {
		const part = 1 / this.traits.pulsesPerTurn;
		const into = (((angle - offset) % part) + part) % part;
		return Math.abs(into - part / 2);
	}
}
