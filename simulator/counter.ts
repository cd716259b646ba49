import type { Edge } from './physics.ts';

/** What an edge amounted to. */
export type Pulse = 1 | -1 | null;

/** Steps of a quadrature pair: [from][to], states being A + 2·B. A jump over two states says nothing. */
const steps = [
	[0, 1, -1, 0],
	[-1, 0, 0, 1],
	[1, 0, 0, -1],
	[0, -1, 1, 0]
];

/** An output that went off for less than this chatters: the magnet has not left the sensor. */
const leftMsMin = 3;

/**
 * Edges to pulses, as the firmware's interrupt does it. With two sensors a pulse is a whole magnet passed, all four
 * steps one way, so a spindle rocked on the edge counts nothing. With one sensor a pulse is the output going on after
 * the magnet had left, and one that follows closer than half the shortest possible period is refused.
 */
export class Counter {
	/** Refused, bouncing pulses. */
	refused = 0;

	private state = 0;
	private travelled = 0;
	private lastOnMs = -Infinity;
	private lastOffMs = -Infinity;
	private readonly closestMs: number;

	constructor(
		private readonly seesDirection: boolean,
		rpmMax: number,
		pulsesPerTurn: number
	) {
		this.closestMs = 60_000 / (rpmMax * pulsesPerTurn) / 2;
	}

	take(edge: Edge): Pulse {
		const bounced = this.noteBounce(edge);
		if (!this.seesDirection) return edge.channel === 'A' && edge.on && !bounced ? 1 : null;

		const bit = edge.channel === 'A' ? 1 : 2;
		const state = edge.on ? this.state | bit : this.state & ~bit;
		this.travelled += steps[this.state]![state]!;
		this.state = state;
		if (state !== 0) return null;
		const travelled = this.travelled;
		this.travelled = 0;
		if (travelled >= 4) return 1;
		return travelled <= -4 ? -1 : null;
	}

	private noteBounce(edge: Edge): boolean {
		if (edge.channel !== 'A') return false;
		if (!edge.on) {
			this.lastOffMs = edge.atMs;
			return false;
		}
		const bounced = edge.atMs - this.lastOnMs < this.closestMs || edge.atMs - this.lastOffMs < leftMsMin;
		if (bounced) this.refused++;
		else this.lastOnMs = edge.atMs;
		return bounced;
	}
}
