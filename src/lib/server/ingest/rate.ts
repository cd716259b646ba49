/** Lines a second one winder may send for long: twice what a spindle at speed needs. */
export const linesPerSecond = 20;
/** Lines at once, for what was kept while the link was down. An hour of spool comes in some minutes. */
export const burstLines = 600;

/** A bucket that fills by the second and holds one burst. */
export class LineBucket {
	#tokens = burstLines;
	#at: number;

	constructor(now: number) {
		this.#at = now;
	}

	/** Takes all of `lines` or none. Returns 0, or the milliseconds until there is room for them. */
	take(lines: number, now: number): number {
		// A wall clock set back must not empty it.
		const passedMs = Math.max(0, now - this.#at);
		this.#tokens = Math.min(burstLines, this.#tokens + (passedMs / 1000) * linesPerSecond);
		this.#at = now;
		if (lines <= this.#tokens) {
			this.#tokens -= lines;
			return 0;
		}
		return Math.ceil(((lines - this.#tokens) / linesPerSecond) * 1000);
	}
}
