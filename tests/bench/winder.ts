import { randomBytes } from 'node:crypto';
import { formatLine } from '../../src/lib/turnline/index.ts';

/** 600 turns a minute: one turn with each of ten lines a second, so that each line can be told by its count. */
export const periodMs = 100;
const rpm = 600;

/** What the lines of one winder say: a turn more with each tick, on a clock that begins with it. */
export class LineMaker {
	readonly boot = randomBytes(4).toString('hex').toUpperCase();
	readonly #bornAt = performance.now();
	#n = 0;
	#e = 0;
	#f = 0;

	/** Turns so far. */
	get turns(): number {
		return this.#f;
	}

	hi(): string {
		return formatLine({
			verb: 'HI',
			p: 1,
			dev: 'w-bench',
			b: this.boot,
			n: this.#n,
			e: this.#e,
			f: this.#f,
			v: 0,
			t: this.#t(),
			ppr: 1,
			dir: 1,
			rep: periodMs,
			buf: 256
		});
	}

	go(): string {
		return this.#event('go');
	}

	tick(): string {
		this.#f += 1;
		this.#n += 1;
		return formatLine({ verb: 'T', b: this.boot, n: this.#n, e: this.#e, f: this.#f, v: 0, r: rpm, t: this.#t() });
	}

	/** A last turn that came slowly, and the word that it stands. */
	coastDown(): string[] {
		return [this.tick(), this.#event('stop')];
	}

	#event(k: 'go' | 'stop'): string {
		this.#n += 1;
		this.#e += 1;
		return formatLine({ verb: 'E', b: this.boot, n: this.#n, e: this.#e, f: this.#f, v: 0, t: this.#t(), k });
	}

	#t(): number {
		return Math.floor(performance.now() - this.#bornAt);
	}
}
