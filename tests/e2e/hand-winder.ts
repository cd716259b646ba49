import { randomBytes } from 'node:crypto';
import { setTimeout as pause } from 'node:timers/promises';
import { formatLine, type EventKind } from '../../src/lib/turnline/index.ts';
import type { TestServer, TestWinder } from './server.ts';

/** How much faster than the wall clock its time runs: any count a test needs is wound in a moment. */
export const handTimeScale = 200;
/** Settings of a winder that is turned by hand in a test. */
export const handSettings = { timeScale: handTimeScale, rpmMax: 20_000 };

/** Wall ms between two lines while it stands. */
const standingMs = 300;
/** Wall ms each step of turning takes at least. */
const stepMs = 40;
/** So many turns fit in one step at the highest speed. */
const stepTurns = 2_000;

interface Kept {
	n: number;
	e: number;
	event: boolean;
	text: string;
}

/**
 * A winder whose spindle turns exactly as far as the test says. It speaks over HTTP, keeps what was not acknowledged, and
 * sends it again at a new link: the birth line first, then events, then the newest ticks.
 */
export class HandWinder {
	readonly boot = randomBytes(4).toString('hex').toUpperCase();
	forward = 0;
	reverse = 0;
	#n = 0;
	#e = 0;
	#kept: Kept[] = [];
	#linked = false;
	#born = true;
	#turning = false;
	#timer: NodeJS.Timeout | null = null;
	#sending: Promise<void> = Promise.resolve();
	readonly #bornAtMs = performance.now();

	constructor(
		readonly server: TestServer,
		readonly winder: TestWinder
	) {}

	/** Links it for the first time, or again: what it kept goes out. */
	async link(): Promise<void> {
		this.#linked = true;
		this.#born = true;
		this.#timer ??= setInterval(() => void this.#tick(0), standingMs);
		await this.#send();
	}

	/** Nothing comes through any more; the spindle and its counter do not mind. */
	async unlink(): Promise<void> {
		this.#linked = false;
		await this.#sending;
	}

	/** Ends it. */
	async end(): Promise<void> {
		if (this.#timer) clearInterval(this.#timer);
		this.#timer = null;
		await this.unlink();
	}

	/** Turns on and on: so many turns more, and is still turning then. */
	async turn(turns: number): Promise<void> {
		if (!this.#turning) {
			this.#turning = true;
			await this.#event('go');
		}
		for (let left = turns; left > 0; left -= stepTurns) {
			const beganAtMs = this.#t();
			await pause(stepMs);
			const step = Math.min(left, stepTurns);
			this.forward += step;
			await this.#tick((step / (this.#t() - beganAtMs)) * 60_000);
		}
	}

	/** Stands still. */
	async stop(): Promise<void> {
		this.#turning = false;
		await this.#event('stop');
		await this.#tick(0);
	}

	/** From standing to standing. */
	async wind(turns: number): Promise<void> {
		await this.turn(turns);
		await this.stop();
	}

	#t(): number {
		return Math.floor((performance.now() - this.#bornAtMs) * handTimeScale);
	}

	#totals() {
		return { b: this.boot, n: this.#n, e: this.#e, f: this.forward, v: this.reverse, t: this.#t() };
	}

	/** At least one turn a minute while it turns: a speed of 0 would say that it stands. */
	async #tick(rpm: number): Promise<void> {
		const r = this.#turning ? Math.max(60, Math.round(rpm)) : 0;
		this.#n += 1;
		this.#keep(false, formatLine({ verb: 'T', ...this.#totals(), r: Math.min(r, 32_767) }));
		await this.#send();
	}

	async #event(k: EventKind): Promise<void> {
		this.#n += 1;
		this.#e += 1;
		this.#keep(true, formatLine({ verb: 'E', ...this.#totals(), k }));
		await this.#send();
	}

	#keep(event: boolean, text: string): void {
		this.#kept.push({ n: this.#n, e: this.#e, event, text });
	}

	/** One request at a time, each with all that waits. */
	#send(): Promise<void> {
		this.#sending = this.#sending.then(() => this.#post());
		return this.#sending;
	}

	async #post(): Promise<void> {
		if (!this.#linked) return;
		const born = this.#born;
		const hi = { verb: 'HI', p: 1, dev: this.winder.name, ppr: 1, dir: 1, rep: 100, buf: 256 } as const;
		const lines = born ? [formatLine({ ...hi, ...this.#totals() })] : [];
		const events = this.#kept.filter(({ event }) => event);
		const ticks = this.#kept.filter(({ event }) => !event).slice(-100);
		const rest = born ? [...events, ...ticks.reverse()] : [...events, ...ticks].sort((a, b) => a.n - b.n);
		lines.push(...rest.map(({ text }) => text));
		try {
			const answer = await fetch(`${this.server.url}/api/v1/winders/${this.winder.id}/lines`, {
				method: 'POST',
				headers: { authorization: `Bearer ${this.winder.linkKey}`, 'content-type': 'text/plain' },
				body: lines.join('\n') + '\n'
			});
			if (!answer.ok) {
				this.#born = true;
				return;
			}
			const { ack, rejected } = (await answer.json()) as {
				ack: { b: string; n: number; e: number } | null;
				rejected: unknown[];
			};
			if (rejected.length > 0) throw new Error(`lines were refused: ${JSON.stringify(rejected)}`);
			this.#born = false;
			if (ack?.b !== this.boot) return;
			this.#kept = this.#kept.filter(({ n, e, event }) => (event ? e > ack.e : n > ack.n));
		} catch (error) {
			if (!(error instanceof TypeError)) throw error;
			// No server: kept, and sent again at the next link.
			this.#born = true;
		}
	}
}
