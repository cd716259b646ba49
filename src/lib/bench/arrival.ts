/**
 * How much later than usual an event came. Server and browser share no clock, so the smallest difference seen between an
 * event's own time and its arrival is taken for an undelayed one; a small drift of the clocks is forgotten with the
 * windows.
 */
export interface Arrivals {
	/** Smallest difference in this window and in the one before, ms. */
	least: number;
	leastBefore: number;
	windowSinceMs: number;
	lastAtMs: number;
	delayMs: number;
}

const windowMs = 60_000;
/** Rounding of the two clocks, and a timer that fires late. */
const slackMs = 250;

/**
 * @param before null at the first event
 * @param sentAt Unix ms on the server's clock
 * @param receivedAtMs monotonic ms of the browser
 */
export function arrived(before: Arrivals | null, sentAt: number, receivedAtMs: number): Arrivals {
	const difference = receivedAtMs - sentAt;
	const fresh = {
		least: difference,
		leastBefore: difference,
		windowSinceMs: receivedAtMs,
		lastAtMs: receivedAtMs,
		delayMs: 0
	};
	if (before === null) return fresh;
	const usual = Math.min(before.least, before.leastBefore);
	const delayMs = difference - usual;
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
