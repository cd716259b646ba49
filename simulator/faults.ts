import type { Random } from './random.ts';

/** What happens to lines between the winder and the carrier. Pure: times are wall milliseconds since the start. */

export interface Outage {
	/** Seconds of wall time after the start. */
	fromS: number;
	forS: number;
}

export interface FaultTraits {
	/** Chances, 0 to 1, of each line in each direction. */
	drop: number;
	double: number;
	reorder: number;
	corrupt: number;
	/** Mean delay in wall milliseconds; each line takes between half and one and a half of it, in order. */
	delayMs: number;
	outages: Outage[];
}

export const noFaults: FaultTraits = { drop: 0, double: 0, reorder: 0, corrupt: 0, delayMs: 0, outages: [] };

/** A line out of order comes so much later than it should, at most. */
const reorderMsMax = 400;

export function inOutage(traits: FaultTraits, nowMs: number): boolean {
	return traits.outages.some(({ fromS, forS }) => nowMs >= fromS * 1000 && nowMs < (fromS + forS) * 1000);
}

/** One direction of a bad link: lines in, and later, perhaps, lines out. */
export class Pipe {
	private waiting: { atMs: number; order: number; text: string }[] = [];
	private order = 0;
	private lastMs = 0;

	constructor(
		private readonly traits: FaultTraits,
		private readonly random: Random
	) {}

	push(text: string, nowMs: number): void {
		const { drop, double, reorder, corrupt, delayMs } = this.traits;
		if (this.happens(drop)) return;
		const copies = this.happens(double) ? 2 : 1;
		for (let copy = 0; copy < copies; copy++) {
			const delay = delayMs * (delayMs > 0 ? 0.5 + this.random() : 0);
			let atMs = Math.max(this.lastMs, nowMs + delay);
			if (this.happens(reorder)) atMs += this.random() * reorderMsMax;
			else this.lastMs = atMs;
			const spoilt = this.happens(corrupt) ? spoil(text, this.random) : text;
			this.waiting.push({ atMs, order: this.order++, text: spoilt });
		}
	}

	/** The lines that arrive by now, in the order they arrive. */
	due(nowMs: number): string[] {
		if (this.waiting.length === 0) return [];
		const due = this.waiting.filter((line) => line.atMs <= nowMs);
		if (due.length === 0) return [];
		this.waiting = this.waiting.filter((line) => line.atMs > nowMs);
		return due.sort((one, other) => one.atMs - other.atMs || one.order - other.order).map((line) => line.text);
	}

	/** The link is gone, and with it what was on the way. */
	clear(): void {
		this.waiting = [];
	}

	private happens(chance: number): boolean {
		return chance > 0 && this.random() < chance;
	}
}

/** One visible character becomes another, or one is lost. */
function spoil(text: string, random: Random): string {
	const at = Math.floor(random() * text.length);
	if (random() < 0.2) return text.slice(0, at) + text.slice(at + 1);
	const was = text.charCodeAt(at);
	const shift = 1 + Math.floor(random() * 93);
	return text.slice(0, at) + String.fromCharCode(33 + ((was - 33 + shift + 94) % 94)) + text.slice(at + 1);
}
