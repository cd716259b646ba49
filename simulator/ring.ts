import { formatLine, type Event, type Tick } from '../src/lib/turnline/index.ts';

/** A line the winder keeps until it needs it no more. */
export interface KeptLine {
	line: Tick | Event;
	text: string;
	/** Device time it was made at, unwrapped: `t` in the line wraps. */
	madeMs: number;
	/** When it was last handed to the carrier, or null. */
	sentMs: number | null;
	/** No longer in the ring: acknowledged, or given up for room. */
	gone: boolean;
}

export const isEvent = (kept: KeptLine): kept is KeptLine & { line: Event } => kept.line.verb === 'E';

/**
 * The lines of one boot that the host has not acknowledged. When it is full, ticks within go first (those whose
 * neighbours tell most of what they told), never an event as long as there is a tick.
 */
export class Ring {
	lines: KeptLine[] = [];
	/** Ticks and events given up for room. */
	thinned = 0;
	eventsLost = 0;

	constructor(readonly linesMax: number) {}

	get events(): (KeptLine & { line: Event })[] {
		return this.lines.filter(isEvent);
	}

	get full(): boolean {
		return this.lines.length >= this.linesMax;
	}

	/** Keeps a tick; where only events are left to give up, the tick is not kept. */
	addTick(line: Tick, madeMs: number): KeptLine {
		const kept = keep(line, madeMs);
		if (this.full && !this.thin()) kept.gone = true;
		else this.lines.push(kept);
		return kept;
	}

	/** Keeps an event. There must be room: see `makeRoomForEvent`. */
	addEvent(line: Event, madeMs: number): KeptLine {
		const kept = keep(line, madeMs);
		this.lines.push(kept);
		return kept;
	}

	/** True when an event had to be given up. A report of lost events is the last to go. */
	makeRoomForEvent(): boolean {
		if (!this.full || this.thin()) return false;
		const events = this.events;
		const oldest = events.find((kept) => kept.line.k !== 'bufov') ?? events[0]!;
		this.remove(oldest);
		this.eventsLost++;
		return true;
	}

	/** Frees events by `e` alone, ticks by `n`. */
	acknowledge(n: number, e: number): KeptLine[] {
		const freed = this.lines.filter((kept) => (isEvent(kept) ? kept.line.e <= e : kept.line.n <= n));
		for (const kept of freed) kept.gone = true;
		this.lines = this.lines.filter((kept) => !kept.gone);
		return freed;
	}

	/** Gives up the tick that is missed least; false when there is none. */
	private thin(): boolean {
		let least: KeptLine | null = null;
		let leastGapMs = Infinity;
		for (let at = 0; at < this.lines.length; at++) {
			const kept = this.lines[at]!;
			if (isEvent(kept)) continue;
			const before = this.lines[at - 1];
			const after = this.lines[at + 1];
			// The ends are no inner lines: they go only when nothing else is left.
			const gapMs = before && after ? after.madeMs - before.madeMs : Number.MAX_VALUE;
			if (gapMs < leastGapMs) {
				least = kept;
				leastGapMs = gapMs;
			}
		}
		if (!least) return false;
		this.remove(least);
		this.thinned++;
		return true;
	}

	private remove(kept: KeptLine): void {
		kept.gone = true;
		this.lines.splice(this.lines.indexOf(kept), 1);
	}
}

function keep(line: Tick | Event, madeMs: number): KeptLine {
	return { line, text: formatLine(line), madeMs, sentMs: null, gone: false };
}
