import { burstLinesMax, linesPerSecondMax } from '../../turnline/index.ts';

/** A bucket that fills by the second and holds one burst. */
export class LineBucket {
	#tokens = burstLinesMax;
	#at: number;

	constructor(now: number) {
		this.#at = now;
	}

	/** Takes all of `lines` or none. Returns 0, or the milliseconds until there is room for them. */
	take(lines: number, now: number): number {
		// A wall clock set back must not empty it.
		const passedMs = Math.max(0, now - this.#at);
		this.#tokens = Math.min(burstLinesMax, this.#tokens + (passedMs / 1000) * linesPerSecondMax);
		this.#at = now;
		if (lines <= this.#tokens) {
			this.#tokens -= lines;
			return 0;
		}
		return Math.ceil(((lines - this.#tokens) / linesPerSecondMax) * 1000);
	}
}
