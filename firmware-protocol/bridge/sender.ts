import { burstLinesMax, linesPerSecondMax } from '../../src/lib/turnline/index.ts';
import type { Spool, SpooledLine } from './spool.ts';
import type { Outgoing, Uplink } from './uplink.ts';

/**
 * Brings lines up: those of now first, so that the screen is right at once, and between them what the spool holds, in the
 * order in which it came. Lines of an earlier boot go before any of a later one: the server tells boots apart by that.
 */

/** Ticks of the spool go one for so much of the time they were received in, as in any replay. */
const tickApartMs = 1_000;
/** An event that was sent and not acknowledged goes again. */
const eventAgainMs = 2_000;
/** Lines of now that wait for the server; older ticks among them are left out. */
const liveLinesMax = 200;
/** The server lets so many through at once; some are left for the lines of now. */
const replayBurst = burstLinesMax - 150;
/** Lines of now take half of what a winder may send over time. */
const replayPerSecond = linesPerSecondMax / 2;
/** Below this an answer is still on its way, not late. */
const lateAnswerMs = 250;
/** How often it is noted in the spool what is done with. */
const noteMs = 1_000;

/** `seq` is null for an answer to a command: of use now or never, so never in the spool. */
export interface Item extends Outgoing {
	seq: number | null;
	at: number;
}

export interface SenderEvents {
	/** A line the server does not take, and why. */
	refused(text: string, why: string): void;
}

export class Sender {
	readonly #spool: Spool;
	readonly #uplink: Uplink;
	readonly #events: SenderEvents;
	/** Not sent since the link is up. */
	#live: Item[] = [];
	/** The spool is read from here up to there. */
	#from = 0;
	#to = 0;
	#ready: Promise<unknown> = Promise.resolve();
	#sent: Item[] = [];
	#sentAtMs = 0;
	/** Events sent, whose acknowledgement has not come. */
	#open = new Map<number, { item: Item; sentAtMs: number }>();
	#acked = new Map<string, number>();
	#lastTick = new Map<string, number>();
	#credit = replayBurst;
	#creditAtMs = performance.now();
	#boot: string | null = null;
	#up = false;
	#closed = false;
	#wake: () => void = () => {};
	#notedAtMs = performance.now();
	readonly #running: Promise<void>;

	constructor(spool: Spool, uplink: Uplink, events: SenderEvents) {
		this.#spool = spool;
		this.#uplink = uplink;
		this.#events = events;
		this.#boot = spool.boots.marks.at(-1)?.b ?? null;
		this.#running = this.#run();
	}

	get linked(): boolean {
		return this.#up;
	}

	/** Lines of the spool that are still to be sent, roughly: ticks are left out on the way. */
	get behind(): number {
		return this.#up ? Math.max(0, this.#to - Math.max(this.#from, this.#spool.freedSeq)) : 0;
	}

	linkUp(): void {
		this.#up = true;
		this.#live = [];
		this.#open.clear();
		this.#acked.clear();
		this.#lastTick.clear();
		this.#from = this.#spool.freedSeq;
		this.#to = this.#spool.nextSeq;
		// What was heard but is not on disk yet belongs to what is read from it.
		this.#ready = this.#spool.append([]);
		this.#wake();
	}

	linkDown(): void {
		this.#up = false;
		this.#live = [];
		this.#wake();
	}

	/** Lines just heard. Without a link they are in the spool, and the answers among them are void. */
	push(lines: readonly Item[]): void {
		for (const { line } of lines) if ('b' in line && line.b !== undefined) this.#boot = line.b;
		if (!this.#up) return;
		this.#live.push(...lines);
		while (this.#live.length > liveLinesMax) {
			const tick = this.#live.findIndex(({ line }) => line.verb === 'T');
			if (tick < 0) break;
			this.#live.splice(tick, 1);
		}
		// The server counts and shows what it cannot save just now: the screen must not stand still for its disk.
		const late = this.#sent.length > 0 && performance.now() - this.#sentAtMs > lateAnswerMs;
		if (late && !this.#olderFirst()) this.#uplink.peek(lines);
		this.#wake();
	}

	acked(b: string, e: number): void {
		this.#acked.set(b, Math.max(this.#acked.get(b) ?? 0, e));
		for (const [seq, { item }] of this.#open) {
			if (item.line.verb === 'E' && item.line.b === b && item.line.e <= e) this.#open.delete(seq);
		}
		void this.#free();
	}

	/** Whether events of this boot after `e` are still here; those that were sent go again at once. */
	async sendAgain(b: string, e: number): Promise<boolean> {
		let found = false;
		const is = ({ line }: Outgoing) => line.verb === 'E' && line.b === b && line.e > e;
		for (const open of this.#open.values()) {
			if (!is(open.item)) continue;
			open.sentAtMs = -Infinity;
			found = true;
		}
		found ||= [...this.#live, ...this.#sent].some(is);
		for (let seq = this.#from; !found && seq < this.#to;) {
			const { lines, next } = await this.#spool.read(seq, 500);
			if (lines.length === 0) break;
			found = lines.some(is);
			seq = next;
		}
		this.#wake();
		return found;
	}

	async close(): Promise<void> {
		await this.#free();
		this.#closed = true;
		this.#wake();
		await this.#uplink.close();
		await this.#running;
	}

	async #run(): Promise<void> {
		while (!this.#closed) {
			await this.#ready;
			const items = this.#up ? await this.#compose() : [];
			if (!this.#up || this.#closed) {
				this.#sent = [];
				await this.#woken(null);
				continue;
			}
			if (items.length === 0) {
				const polls = await this.#woken(this.#idleMs());
				if (polls || this.#uplink.pollMs === null || !this.#up) continue;
			}
			const outcome = await this.#uplink.send(items);
			this.#sent = [];
			if (outcome.kind === 'taken') this.#settle(items, outcome.refused);
			else if (this.#up) {
				this.#putBack(items);
				if (outcome.kind === 'later') await this.#pause(outcome.ms);
			}
			await this.#free();
		}
	}

	/** The next message, in `#sent` from the first moment: what stands nowhere would count as done with. */
	async #compose(): Promise<Item[]> {
		const max = this.#uplink.linesMax;
		const items: Item[] = [];
		this.#sent = items;
		this.#sentAtMs = performance.now();
		while (this.#from < this.#to && (await this.#nextBoot()) !== this.#boot) {
			await this.#fromSpool(items, max);
			if (items.length > 0) return items;
		}
		for (const open of this.#open.values()) {
			const due = this.#sentAtMs - open.sentAtMs >= eventAgainMs;
			if (due && items.length < max / 2) items.push(open.item);
		}
		items.push(...this.#live.splice(0, max - items.length));
		await this.#fromSpool(items, Math.min(max, items.length + this.#allowance()));
		return items;
	}

	#olderFirst(): boolean {
		const first = this.#sent[0]?.line;
		return first !== undefined && 'b' in first && first.b !== this.#boot;
	}

	async #nextBoot(): Promise<string | null> {
		const { lines } = await this.#spool.read(this.#from, 1);
		const line = lines[0];
		if (!line || line.seq >= this.#to) {
			this.#from = this.#to;
			return this.#boot;
		}
		return line.line.b ?? this.#boot;
	}

	/** Adds lines of one boot, thinned, until there are `linesMax`. */
	async #fromSpool(items: Item[], linesMax: number): Promise<void> {
		let boot: string | null = null;
		while (this.#from < this.#to && items.length < linesMax) {
			const { lines } = await this.#spool.read(this.#from, linesMax);
			if (lines.length === 0) this.#from = this.#to;
			for (const line of lines) {
				if (line.seq >= this.#to) {
					this.#from = this.#to;
					return;
				}
				const b: string | null = line.line.b ?? boot;
				if ((boot !== null && b !== boot) || items.length >= linesMax) return;
				boot = b;
				this.#from = line.seq + 1;
				if (!this.#worthSending(line)) continue;
				items.push(line);
				this.#credit -= 1;
			}
		}
	}

	#worthSending({ line, at }: SpooledLine): boolean {
		if (line.verb !== 'T') return true;
		if (Math.abs(at - (this.#lastTick.get(line.b) ?? -Infinity)) < tickApartMs) return false;
		this.#lastTick.set(line.b, at);
		return true;
	}

	#allowance(): number {
		const now = performance.now();
		this.#credit = Math.min(replayBurst, this.#credit + ((now - this.#creditAtMs) / 1000) * replayPerSecond);
		this.#creditAtMs = now;
		return Math.floor(this.#credit);
	}

	#settle(items: readonly Item[], refused: readonly { at: number; why: string }[]): void {
		for (const { at, why } of refused) {
			const item = items[at];
			if (item) this.#events.refused(item.text, why);
		}
		const sentAtMs = performance.now();
		for (const item of items) {
			if (item.seq === null) continue;
			const { line } = item;
			const stored = this.#uplink.takenIsStored || line.verb !== 'E' || line.e <= (this.#acked.get(line.b) ?? 0);
			if (stored) this.#open.delete(item.seq);
			else this.#open.set(item.seq, { item, sentAtMs });
		}
	}

	/** Nothing of a message was taken: its lines are the next to go, but for those that go again by themselves. */
	#putBack(items: readonly Item[]): void {
		const again = items.filter(({ seq }) => seq === null || !this.#open.has(seq));
		this.#live.unshift(...again);
	}

	async #free(): Promise<void> {
		const seqs: number[] = [this.#spool.nextSeq, ...this.#open.keys()];
		for (const { seq } of [...this.#live, ...this.#sent]) if (seq !== null) seqs.push(seq);
		// Without a link nothing stands in these lists, and everything in the spool is still to be sent.
		if (!this.#up) return;
		if (this.#from < this.#to) seqs.push(this.#from);
		await this.#spool.free(Math.min(...seqs));
		if (performance.now() - this.#notedAtMs < noteMs) return;
		this.#notedAtMs = performance.now();
		await this.#spool.note();
	}

	#idleMs(): number | null {
		const now = performance.now();
		const due = [...this.#open.values()].map(({ sentAtMs }) => Math.max(10, sentAtMs + eventAgainMs - now));
		if (this.#uplink.pollMs !== null) due.push(this.#uplink.pollMs);
		// Room for more of the spool comes with time.
		if (this.#from < this.#to) due.push(1000 / replayPerSecond);
		return due.length > 0 ? Math.min(...due) : null;
	}

	/** true: something happened; false: the time is over. */
	#woken(msMax: number | null): Promise<boolean> {
		return new Promise((resolve) => {
			const timer = msMax === null ? null : setTimeout(() => resolve(false), msMax);
			this.#wake = () => {
				if (timer) clearTimeout(timer);
				resolve(true);
			};
			if (this.#closed || (this.#live.length > 0 && this.#up)) this.#wake();
		});
	}

	async #pause(ms: number): Promise<void> {
		const until = performance.now() + ms;
		while (!this.#closed && this.#up) {
			const left = until - performance.now();
			if (left <= 0) return;
			await new Promise<void>((resolve) => {
				const timer = setTimeout(resolve, Math.min(left, 250));
				timer.unref();
			});
		}
	}
}
