/**
 * How old what came really is. Server and browser share no clock: the smallest difference seen between a message's own
 * time and its arrival is taken for one that was not held up. A slow drift of the clocks is forgotten with the windows.
 */
export interface Arrivals {
	/** Smallest difference in this window and in the one before, ms. */
	least: number;
	leastBefore: number;
	windowSinceMs: number;
	lastAtMs: number;
	/** How much later than usual the last beat came. */
	delayMs: number;
}

const windowMs = 60_000;
/** Rounding of the two clocks, and a timer that fires late. */
const slackMs = 250;

/**
 * Takes in a beat, which carries the time of its sending.
 *
 * @param before null at the first beat
 * @param sentAt Unix ms on the server's clock
 * @param receivedAtMs monotonic ms of the browser
 */
export function beatCame(before: Arrivals | null, sentAt: number, receivedAtMs: number): Arrivals {
	const difference = receivedAtMs - sentAt;
	const fresh = {
		least: difference,
		leastBefore: difference,
		windowSinceMs: receivedAtMs,
		lastAtMs: receivedAtMs,
		delayMs: 0
	};
	if (before === null) return fresh;
	const delayMs = difference - usual(before);
	// A delay cannot grow by more than the time that has passed: beyond that the server's clock was set back.
	if (delayMs > before.delayMs + (receivedAtMs - before.lastAtMs) + slackMs) return fresh;
	const next =
		receivedAtMs - before.windowSinceMs >= windowMs
			? { least: difference, leastBefore: before.least, windowSinceMs: receivedAtMs }
			: {
					least: Math.min(before.least, difference),
					leastBefore: before.leastBefore,
					windowSinceMs: before.windowSinceMs
				};
	return { ...next, lastAtMs: receivedAtMs, delayMs: Math.max(0, delayMs) };
}

/**
 * How long before its arrival a state was made, beyond what every message takes: held up on the way, or made long ago and
 * sent as the newest there is.
 *
 * @param madeAt Unix ms on the server's clock
 * @returns ms, 0 when no beat has come yet
 */
export function madeBeforeMs(arrivals: Arrivals | null, madeAt: number, receivedAtMs: number): number {
	return arrivals === null ? 0 : Math.max(0, receivedAtMs - madeAt - usual(arrivals));
}

const usual = ({ least, leastBefore }: Arrivals) => Math.min(least, leastBefore);
