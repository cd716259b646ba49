import { z } from 'zod';
import type { LiveView, TapKind } from '../winding/types.ts';

/** A tap as it is kept until the server has answered it. */
export interface WaitingTap {
	id: string;
	/** Who touched: another person signing in on this tablet does not send it. */
	memberId: string;
	tap: TapKind;
	/** Unix ms of this browser, so that its age is known after a reload as well. */
	madeAt: number;
}

export interface TapEvents {
	/** The queue changed. */
	changed(waiting: readonly WaitingTap[]): void;
	answered(live: LiveView | null): void;
	/** Refused for good, with the plain reason and, where the server tells it, the state it was refused in. */
	refused(reason: string, live: LiveView | null): void;
	signedOut(): void;
}

export interface TapParts {
	fetch(url: string, init: RequestInit): Promise<Response>;
	setTimeout(run: () => void, ms: number): unknown;
	clearTimeout(timer: unknown): void;
	now(): number;
	newId(): string;
	/** Survives a reload of the page, not the tab. */
	store: { read(): string | null; write(text: string): void };
}

const waitingTapsSchema = z.array(
	z.object({
		id: z.string(),
		memberId: z.string(),
		madeAt: z.number(),
		tap: z.looseObject({ kind: z.string() })
	})
);

const retryFirstMs = 300;
const retryMsMax = 3_000;
/** More than a person taps while a server restarts; beyond it something holds the key down. */
const waitingMax = 20;
/** A request that nobody answers is sent again; the id makes that harmless. */
const answerMsMax = 8_000;

/**
 * Sends each tap until the server has answered it, one after the other. The id is made at the touch, so a tap sent twice
 * is done once.
 */
export class TapQueue {
	#waiting: WaitingTap[] = [];
	#sending = false;
	#retry: unknown = null;
	#attempt = 0;
	#stopped = false;

	constructor(
		readonly url: string,
		readonly memberId: string,
		readonly events: TapEvents,
		readonly parts: TapParts
	) {}

	/** Takes up what a reload has left waiting. */
	start(): void {
		const read = waitingTapsSchema.safeParse(parseOrNull(this.parts.store.read()));
		if (read.success) {
			this.#waiting = read.data.filter(({ memberId }) => memberId === this.memberId) as unknown as WaitingTap[];
		}
		this.#changed();
		void this.#send();
	}

	stop(): void {
		this.#stopped = true;
		if (this.#retry !== null) this.parts.clearTimeout(this.#retry);
	}

	get waiting(): readonly WaitingTap[] {
		return this.#waiting;
	}

	/** false: too many wait already, the tap was not taken. */
	push(tap: TapKind): boolean {
		if (this.#waiting.length >= waitingMax) return false;
		this.#waiting.push({ id: this.parts.newId(), memberId: this.memberId, tap, madeAt: this.parts.now() });
		this.#changed();
		void this.#send();
		return true;
	}

	/** Try at once: the network has come back. */
	nudge(): void {
		if (this.#retry === null || this.#stopped) return;
		this.parts.clearTimeout(this.#retry);
		this.#retry = null;
		this.#attempt = 0;
		void this.#send();
	}

	#changed(): void {
		this.parts.store.write(JSON.stringify(this.#waiting));
		this.events.changed(this.#waiting.slice());
	}

	#done(tap: WaitingTap): void {
		this.#waiting = this.#waiting.filter(({ id }) => id !== tap.id);
		this.#attempt = 0;
		this.#changed();
	}

	#later(): void {
		const full = Math.min(retryMsMax, retryFirstMs * 2 ** Math.min(this.#attempt++, 10));
		this.#retry = this.parts.setTimeout(() => {
			this.#retry = null;
			void this.#send();
		}, full);
	}

	async #send(): Promise<void> {
		if (this.#sending || this.#retry !== null || this.#stopped) return;
		this.#sending = true;
		try {
			for (let tap = this.#waiting[0]; tap && !this.#stopped; tap = this.#waiting[0]) {
				if (!(await this.#sendOne(tap))) {
					if (!this.#stopped) this.#later();
					return;
				}
			}
		} finally {
			this.#sending = false;
		}
	}

	/** false: to be sent again later. */
	async #sendOne(waiting: WaitingTap): Promise<boolean> {
		let answer: Response;
		try {
			answer = await this.parts.fetch(this.url, {
				method: 'POST',
				headers: { 'content-type': 'application/json', accept: 'application/json' },
				body: JSON.stringify({
					...waiting.tap,
					id: waiting.id,
					ageMs: Math.max(0, Math.round(this.parts.now() - waiting.madeAt))
				}),
				signal: AbortSignal.timeout(answerMsMax)
			});
		} catch {
			return false;
		}
		if (answer.ok) {
			const body = (await readJson(answer)) as { live?: LiveView } | null;
			if (body === null) return false;
			this.#done(waiting);
			this.events.answered(body.live ?? null);
			return true;
		}
		if (answer.status === 401) {
			this.events.signedOut();
			return false;
		}
		// Refused for good; a server that is overloaded, restarting or without its database is asked again.
		if (answer.status >= 400 && answer.status < 500 && answer.status !== 408 && answer.status !== 429) {
			const problem = (await readJson(answer)) as {
				detail?: unknown;
				title?: unknown;
				live?: LiveView;
			} | null;
			this.#done(waiting);
			const reason = [problem?.detail, problem?.title].find((text) => typeof text === 'string' && text !== '');
			this.events.refused(typeof reason === 'string' ? reason : 'that tap was refused', problem?.live ?? null);
			return true;
		}
		return false;
	}
}

async function readJson(answer: Response): Promise<unknown> {
	try {
		return (await answer.json()) as unknown;
	} catch {
		return null;
	}
}

function parseOrNull(text: string | null): unknown {
	if (text === null) return null;
	try {
		return JSON.parse(text) as unknown;
	} catch {
		return null;
	}
}
