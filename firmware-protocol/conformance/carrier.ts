import { newSplitter } from '../../src/lib/turnline/index.ts';
import type { Entry } from './session.ts';

/** A way to a winder, for one session. */
export interface Carrier {
	/** Lines as they go, without LF; characters are bytes (latin1). They need not be lines of the protocol. */
	send(texts: readonly string[]): void;
	/** Lets time pass: until something came, `ms` are over or the winder is gone. */
	pass(ms: number): Promise<void>;
	nowMs(): number;
	/** What came since the last call. */
	take(): Heard[];
	/** Why there is no winder any more, or null. */
	gone(): string | null;
	/** Each message of lines wants an ACK (WebSocket). */
	wantsAcks: boolean;
	/** Turns the spindle itself, where it can: so many turns forward, then it stands. Else a person is asked. */
	turn?(turns: number): Promise<void>;
	close(): Promise<void>;
}

export type Heard = Pick<Entry, 'atMs' | 'text' | 'dropped'> & { from: 'winder' | 'link' | 'cable' };

/** How long a winder is waited for: it is plugged in meanwhile, and one on Wi-Fi tries again within half a minute, as a rule. */
export const winderMsMax = 60_000;

/** Why no session could begin: the person is told, and nothing is judged. */
export class NoWinder extends Error {}

/** What came, kept until it is taken, and the sleeper that waits for it. */
export class Inbox {
	#held: Heard[] = [];
	#wake: () => void = () => {};
	#splitter = newSplitter();
	#dropped = { tooLong: 0, notAscii: 0 };

	add(...heard: Heard[]): void {
		this.#held.push(...heard);
		this.#wake();
	}

	wake(): void {
		this.#wake();
	}

	/** Bytes as a carrier brings them. */
	bytes(chunk: Uint8Array, atMs: number): void {
		const lines = this.#splitter.push(chunk);
		for (const text of lines) this.add({ atMs, from: 'winder', text });
		const { tooLong, notAscii } = this.#splitter.dropped;
		for (; this.#dropped.tooLong < tooLong; this.#dropped.tooLong++)
			this.add({ atMs, from: 'winder', text: '', dropped: 'too-long' });
		for (; this.#dropped.notAscii < notAscii; this.#dropped.notAscii++)
			this.add({ atMs, from: 'winder', text: '', dropped: 'not-ascii' });
	}

	/** What was held of a line that broke off is forgotten. */
	newLink(): void {
		this.#splitter = newSplitter();
		this.#dropped = { tooLong: 0, notAscii: 0 };
	}

	take(): Heard[] {
		return this.#held.splice(0);
	}

	/** Until something is there, or the time is over. */
	async sleep(ms: number): Promise<void> {
		if (this.#held.length > 0) return;
		await new Promise<void>((resolve) => {
			const timer = setTimeout(resolve, ms);
			this.#wake = () => {
				clearTimeout(timer);
				resolve();
			};
		});
		this.#wake = () => {};
	}
}

/** The clock of this computer, from now on. */
export function realClock(): () => number {
	const start = performance.now();
	return () => performance.now() - start;
}
