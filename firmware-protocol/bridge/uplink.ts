import type { DeviceLine } from '../../src/lib/turnline/index.ts';

/** A way to the server: messages go up one at a time and are answered; commands come down as they please. */

export interface UplinkTarget {
	/** http or https, without a path. */
	server: URL;
	/** The winder's id; only HTTP needs it. */
	winder: string | null;
	linkKey: string;
	/** Take a certificate nobody vouches for; only ever for loopback. */
	insecureTls: boolean;
}

export interface Outgoing {
	text: string;
	line: DeviceLine;
}

export type Outcome =
	/** The server has it on disk, but for the lines it refused. */
	| { kind: 'taken'; refused: { at: number; why: string }[] }
	/** Nothing of it was taken: again after so long. */
	| { kind: 'later'; ms: number }
	/** Nobody knows what became of it: again, on the next link. */
	| { kind: 'lost' };

export interface UplinkEvents {
	up(): void;
	down(): void;
	/** Lines of the server for the winder, as they came. */
	heard(lines: string[]): void;
	/** The server has on disk: of this boot lines up to `n`, and events up to `e` without a gap. */
	acked(b: string, n: number, e: number): void;
	/** In plain words, when it changes; null: all is well. */
	trouble(text: string | null): void;
}

export interface Uplink {
	/** Lines of one message. */
	readonly linesMax: number;
	/** Whether 'taken' says that events are stored; else they are by their acknowledgement alone. */
	readonly takenIsStored: boolean;
	/** Only while up, and one at a time. An empty message asks for commands. */
	send(lines: readonly Outgoing[]): Promise<Outcome>;
	/** Shows lines to the server at once while a message waits for its answer; they are sent again in one of their own. */
	peek(lines: readonly Outgoing[]): void;
	/** When to ask for commands if there is nothing to send; null: they come by themselves. */
	readonly pollMs: number | null;
	close(): Promise<void>;
}

const backoffMs = { first: 250, most: 10_000 };
/** A key the server does not take will hardly be taken a moment later. */
export const refusedBackoffMs = 30_000;

/** Doubles from a quarter of a second to ten seconds, half of it by chance, so that many bridges do not come at once. */
export class Backoff {
	#nextMs = backoffMs.first;

	take(leastMs = 0): number {
		const waitMs = Math.max(leastMs, this.#nextMs * (0.5 + Math.random() / 2));
		this.#nextMs = Math.min(backoffMs.most, this.#nextMs * 2);
		return waitMs;
	}

	reset(): void {
		this.#nextMs = backoffMs.first;
	}
}

export const keyRefusedText = (server: URL, status: number): string =>
	`${server.host} does not take this link key (${status}). Nothing is lost: lines are kept here. Make a new key on the winder's ` +
	'page, start the bridge with it, and they are sent.';
