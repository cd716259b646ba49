import type { LiveView } from '../winding/types.ts';

/** What the bench is told about its stream. */
export interface FeedEvents {
	/** A state newer than the last; `sentAt` is the server's Unix ms. */
	view(view: LiveView): void;
	/** A beat or a state that changes nothing: the stream is alive. */
	beat(sentAt: number | null): void;
	streaming(open: boolean): void;
	access(access: 'ok' | 'signed-out' | 'not-allowed' | 'gone'): void;
}

/** The parts of the browser the feed needs, so that it can be driven by hand. */
export interface FeedParts {
	open(url: string): EventSource;
	fetch(url: string, init: RequestInit): Promise<Response>;
	setTimeout(run: () => void, ms: number): unknown;
	clearTimeout(timer: unknown): void;
	random(): number;
}

/** A stream that says nothing for three beats is dead, whatever its socket believes. */
export const silenceMsMax = 6_500;
const backOffFirstMs = 150;
/** A bench that waits longer than this after the server is back shows an old state for too long. */
const backOffMsMax = 2_000;
/** Attempts without an answer before an answer without a stream is asked for. */
const closed = 2;

/** Wait before attempt `attempt` (from 0): doubling, with half of it by chance so that many screens do not come at once. */
export function backOffMs(attempt: number, random: number): number {
	const full = Math.min(backOffMsMax, backOffFirstMs * 2 ** Math.min(attempt, 10));
	return full / 2 + (full / 2) * random;
}

/** A state replaces the one shown when it is newer, or comes from another start of the server. */
export function isNewer(shown: { server: string; seq: number } | null, next: { server: string; seq: number }): boolean {
	return shown === null || shown.server !== next.server || next.seq >= shown.seq;
}

/**
 * The bench's stream of states. An EventSource ends for good at any answer but 200, and waits long after others, so it is
 * made anew here with its own back-off; a plain request tells why there is no stream.
 */
export class Feed {
	#source: EventSource | null = null;
	#attempt = 0;
	#retry: unknown = null;
	#watch: unknown = null;
	#stopped = false;
	#streaming = false;
	#shown: { server: string; seq: number } | null;

	constructor(
		readonly url: string,
		shown: { server: string; seq: number } | null,
		readonly events: FeedEvents,
		readonly parts: FeedParts
	) {
		this.#shown = shown;
	}

	start(): void {
		this.#connect();
	}

	stop(): void {
		this.#stopped = true;
		this.#drop();
	}

	/** Begin anew at once: the page was hidden, or the network has come back. */
	resync(): void {
		if (this.#stopped) return;
		this.#attempt = 0;
		this.#drop();
		this.#connect();
	}

	/** A state that came another way, such as the answer to a tap. */
	offer(view: LiveView): void {
		if (!isNewer(this.#shown, view)) return;
		this.#shown = { server: view.server, seq: view.seq };
		this.events.view(view);
	}

	#drop(): void {
		if (this.#retry !== null) this.parts.clearTimeout(this.#retry);
		if (this.#watch !== null) this.parts.clearTimeout(this.#watch);
		this.#retry = this.#watch = null;
		this.#source?.close();
		this.#source = null;
		this.#streaming = false;
	}

	#connect(): void {
		const source = this.parts.open(this.url);
		this.#source = source;
		this.#watchSilence();
		source.addEventListener('live', (event) => {
			if (this.#source !== source) return;
			const view = parse<LiveView>((event as MessageEvent<string>).data);
			if (view === null || typeof view.seq !== 'number' || typeof view.server !== 'string') return;
			this.#heard();
			if (isNewer(this.#shown, view)) this.offer(view);
			else this.events.beat(null);
		});
		source.addEventListener('beat', (event) => {
			if (this.#source !== source) return;
			this.#heard();
			const beat = parse<{ at?: unknown }>((event as MessageEvent<string>).data);
			this.events.beat(typeof beat?.at === 'number' ? beat.at : null);
		});
		source.addEventListener('error', () => {
			if (this.#source !== source) return;
			const ended = source.readyState === closed;
			this.#again();
			if (ended) void this.#askWhy();
		});
	}

	#heard(): void {
		this.#attempt = 0;
		this.#watchSilence();
		if (this.#streaming) return;
		this.#streaming = true;
		this.events.streaming(true);
		this.events.access('ok');
	}

	#watchSilence(): void {
		if (this.#watch !== null) this.parts.clearTimeout(this.#watch);
		this.#watch = this.parts.setTimeout(() => this.#again(), silenceMsMax);
	}

	#again(): void {
		if (this.#stopped) return;
		this.#drop();
		this.events.streaming(false);
		this.#retry = this.parts.setTimeout(
			() => {
				this.#retry = null;
				this.#connect();
			},
			backOffMs(this.#attempt++, this.parts.random())
		);
	}

	async #askWhy(): Promise<void> {
		try {
			const answer = await this.parts.fetch(this.url, {
				headers: { accept: 'application/json' },
				cache: 'no-store',
				redirect: 'manual'
			});
			if (this.#stopped) return;
			if (answer.status === 401) this.events.access('signed-out');
			else if (answer.status === 403) this.events.access('not-allowed');
			else if (answer.status === 404) this.events.access('gone');
			else if (answer.ok && answer.headers.get('content-type')?.includes('application/json')) {
				this.events.access('ok');
				this.offer((await answer.json()) as LiveView);
			}
		} catch {
			// No network: the next attempt comes anyway, and the age shown grows meanwhile.
		}
	}
}

function parse<T>(text: string): T | null {
	try {
		const value: unknown = JSON.parse(text);
		return typeof value === 'object' && value !== null ? (value as T) : null;
	} catch {
		return null;
	}
}
