/**
 * Counts attempts per key in a fixed window, in memory that cannot grow without bound. One process serves one
 * database, so a shared store would add a moving part and no safety; a restart forgives, at most once per restart.
 */
export interface AttemptLimit {
	/** Attempts allowed in one window. */
	attemptsMax: number;
	windowMs: number;
	/** Keys remembered at once; beyond that the one counted longest ago is forgotten. */
	keysMax: number;
}

export class Attempts {
	readonly #limit: AttemptLimit;
	// A Map keeps the order of insertion, so the first key is the oldest window.
	readonly #windows = new Map<string, { count: number; endsAtMs: number }>();

	constructor(limit: AttemptLimit) {
		this.#limit = limit;
	}

	/** Counts one attempt. Returns 0 when it may go on, else how many milliseconds to wait; a refused one is not counted. */
	take(key: string, nowMs: number): number {
		const window = this.#windows.get(key);
		if (window && window.endsAtMs > nowMs) {
			if (window.count >= this.#limit.attemptsMax) return window.endsAtMs - nowMs;
			window.count++;
			return 0;
		}
		this.#windows.delete(key);
		for (const [oldest, { endsAtMs }] of this.#windows) {
			if (endsAtMs > nowMs && this.#windows.size < this.#limit.keysMax) break;
			this.#windows.delete(oldest);
		}
		this.#windows.set(key, { count: 1, endsAtMs: nowMs + this.#limit.windowMs });
		return 0;
	}

	/** Forgets a key: the right password was given. */
	forget(key: string): void {
		this.#windows.delete(key);
	}

	get size(): number {
		return this.#windows.size;
	}
}

const QUARTER_HOUR_MS = 15 * 60_000;

/** Ten tries in a quarter of an hour: a tired owner gets in, a guesser gets 350,000 a year, nothing against 15 characters. */
export const accountAttempts = new Attempts({ attemptsMax: 10, windowMs: QUARTER_HOUR_MS, keysMax: 10_000 });
/** A workshop shares one address, so it gets more than an account; a list of addresses cannot be tried from one place. */
export const addressAttempts = new Attempts({ attemptsMax: 50, windowMs: QUARTER_HOUR_MS, keysMax: 10_000 });

/**
 * What stands for "one client" when limiting: the IPv4 address, or the /64 of an IPv6 address, since one subscriber
 * usually holds a whole /64 (RFC 6177).
 */
export function clientKey(address: string): string {
	const mapped = /^::ffff:(\d+\.\d+\.\d+\.\d+)$/i.exec(address);
	if (mapped) return mapped[1]!;
	if (!address.includes(':')) return address;
	const [head = '', tail] = address.toLowerCase().split('%')[0]!.split('::');
	const left = head === '' ? [] : head.split(':');
	const right = tail === undefined || tail === '' ? [] : tail.split(':');
	const zeros = tail === undefined ? [] : Array<string>(Math.max(0, 8 - left.length - right.length)).fill('0');
	const groups = [...left, ...zeros, ...right].slice(0, 4);
	return groups.map((group) => Number.parseInt(group, 16).toString(16)).join(':') + '::/64';
}

/** "wait 12 minutes", rounded up so that following it always works. */
export function waitInWords(waitMs: number): string {
	const seconds = Math.ceil(waitMs / 1000);
	if (seconds < 60) return seconds === 1 ? '1 second' : `${seconds} seconds`;
	const minutes = Math.ceil(seconds / 60);
	return minutes === 1 ? '1 minute' : `${minutes} minutes`;
}
