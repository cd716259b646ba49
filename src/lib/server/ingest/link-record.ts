import type { Refusal } from '../../turnline/index.ts';
import type { Carrier, LinkLog } from './types.ts';

/** Enough to see what a winder does now; the record holds the rest. */
const linesShownMax = 20;
/** A line is at most 160 bytes; noise on a wire is not, and a page shows the start of it. */
const textShownMax = 200;
const errorWindowMs = 10_000;
/** A link that loses more than one line in a hundred wants a look at its cable. */
const errorShare = 0.01;
/** With fewer lines than this a single slip would already be more. */
const errorLinesMin = 20;

/** What is remembered of a winder's link for its page, in memory and bounded. */
export class LinkRecord {
	#lines: LinkLog['lines'] = [];
	#refused: LinkLog['refused'] = {};
	#carriers: LinkLog['carriers'] = {};
	/** Per second: [second, lines, lines refused]. */
	#seconds: [number, number, number][] = [];

	line(at: number, text: string, verdict: LinkLog['lines'][number]['verdict'], carrier: Carrier): void {
		// A part of a string keeps the whole of it in memory, here a whole request: a copy is made of what is shown.
		const shown = Buffer.from(text.slice(0, textShownMax).trim(), 'latin1').toString('latin1');
		this.#lines.push({ at, text: shown, verdict });
		if (this.#lines.length > linesShownMax) this.#lines.shift();
		const known = this.#carriers[carrier];
		this.#carriers[carrier] = { lastAt: at, lines: (known?.lines ?? 0) + 1 };
		const refused = verdict !== 'stored' && verdict !== 'thinned' && verdict !== 'duplicate';
		if (refused) {
			const why: Refusal = verdict;
			this.#refused[why] = (this.#refused[why] ?? 0) + 1;
		}
		const second = Math.floor(at / 1000);
		const last = this.#seconds.at(-1);
		if (last && last[0] === second) {
			last[1] += 1;
			last[2] += refused ? 1 : 0;
		} else {
			this.#seconds.push([second, 1, refused ? 1 : 0]);
			if (this.#seconds.length > errorWindowMs / 1000) this.#seconds.shift();
		}
	}

	/** More than one line in a hundred was refused in the last ten seconds. */
	manyErrors(now: number): boolean {
		let lines = 0;
		let refused = 0;
		for (const [second, all, bad] of this.#seconds) {
			if (second * 1000 < now - errorWindowMs) continue;
			lines += all;
			refused += bad;
		}
		return lines >= errorLinesMin && refused > lines * errorShare;
	}

	log(links: number): LinkLog {
		return {
			lines: [...this.#lines],
			refused: { ...this.#refused },
			carriers: { ...this.#carriers },
			links
		};
	}
}
