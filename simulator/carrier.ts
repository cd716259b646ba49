/** A way to the server. It opens and reopens the link by itself; the winder hears when it is up and when it is gone. */
export interface Carrier {
	/** Lines to go now; without a link they are dropped, the winder keeps what matters. */
	send(lines: string[]): void;
	/** Ends the link as a broken cable would, and tries no other until `mend`. */
	cut(): void;
	mend(): void;
	/** Says the last line, waits briefly until it is gone, and ends for good. */
	close(lastLine: string): Promise<void>;
}

export interface CarrierEvents {
	up(): void;
	down(): void;
	heard(lines: string[]): void;
	/** In plain words, for whoever watches. */
	trouble(text: string): void;
}

export interface CarrierTarget {
	/** http or https, without a path. */
	server: URL;
	winder: string;
	linkKey: string;
	/** Take a certificate nobody vouches for; only ever for loopback. */
	insecureTls: boolean;
	/** For the jitter of the back-off. */
	random: () => number;
}

const backoffMs = { first: 250, most: 10_000 };
/** A key the server does not take will hardly be taken a moment later. */
export const refusedBackoffMs = 30_000;
/** Waiting for the last line to go. */
export const closeMsMax = 800;

/** Doubles from a quarter of a second to ten seconds, half of it by chance, so that many winders do not come at once. */
export class Backoff {
	private nextMs = backoffMs.first;

	constructor(private readonly random: () => number) {}

	/** The wait before the next attempt. */
	take(leastMs = 0): number {
		const waitMs = Math.max(leastMs, this.nextMs * (0.5 + this.random() / 2));
		this.nextMs = Math.min(backoffMs.most, this.nextMs * 2);
		return waitMs;
	}

	reset(): void {
		this.nextMs = backoffMs.first;
	}
}
