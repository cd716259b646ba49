import { appendFile, stat } from 'node:fs/promises';
import { join } from 'node:path';
import {
	openLinePort,
	type HeardLine,
	type LinePort,
	type LinePortState,
	type TtyPlaces
} from '../../src/lib/serial/index.ts';
import { formatLine, parseHostLine, type Answer } from '../../src/lib/turnline/index.ts';
import { hasGap, type BootMark } from './boots.ts';
import { Sender, type Item } from './sender.ts';
import { Spool, type SpooledLine, type SpoolState } from './spool.ts';
import type { Uplink, UplinkEvents } from './uplink.ts';

/**
 * Between a winder's cable and the server: what the winder says is kept on this computer's disk, acknowledged to the winder,
 * and brought to the server whenever that is there. What the server says goes to the winder as it is.
 */

/** Events go to the disk at once. Ticks wait for one another so long, to spare it: a ring of 32 lines holds three seconds. */
const tickSyncMs = 250;
/** A gap in the events is asked for again after so long, doubling, so many times. */
const syncAgainMs = 5_000;
const syncMax = 5;
/** After "I have them no more" the winder may still be sending those it has. */
const goneMs = 3_000;
/** Lines the server refused are kept aside, up to this. */
const asideBytesMax = 1024 * 1024;

export interface BridgeOptions {
	port: string;
	/** The spool; its folder is taken by this bridge alone. */
	spool: Spool;
	folder: string;
	openUplink: (events: UplinkEvents) => Uplink;
	/** What happens, in plain words. */
	tell: (text: string) => void;
	places?: TtyPlaces;
}

export interface BridgeState {
	port: LinePortState;
	server: { linked: boolean; trouble: string | null; behind: number };
	spool: SpoolState;
	boot: { b: string; n: number; e: number } | null;
	/** Lines that the server refused, since the start. */
	refused: number;
}

export class Bridge {
	readonly #options: BridgeOptions;
	readonly #spool: Spool;
	readonly #sender: Sender;
	readonly #port: LinePort;
	#serverTrouble: string | null = null;
	#spoolTrouble = '';
	/** The boot the winder is in. */
	#boot: string | null = null;
	#ticks: SpooledLine[] = [];
	#timer: NodeJS.Timeout | null = null;
	#keeping: Promise<unknown> = Promise.resolve();
	/** What was asked of the winder about a gap. */
	#asked: { b: string; e: number; times: number; atMs: number; goneAtMs: number | null } | null = null;
	/** Boots of which the server itself waits for "I have them no more". */
	readonly #serverAsks = new Set<string>();
	#refused = 0;
	#stopping = false;

	constructor(options: BridgeOptions) {
		this.#options = options;
		this.#spool = options.spool;
		const uplink = options.openUplink({
			up: () => {
				options.tell('Linked to the server.');
				this.#sender.linkUp();
				// The totals of now, so that the screen is right at once.
				this.#ask();
			},
			down: () => {
				if (!this.#stopping) options.tell('The link to the server is gone. Lines are kept here.');
				this.#serverAsks.clear();
				this.#sender.linkDown();
			},
			heard: (texts) => void this.#hear(texts),
			acked: (b, n, e) => this.#acked(b, n, e),
			trouble: (text) => {
				if (text === this.#serverTrouble) return;
				this.#serverTrouble = text;
				if (text !== null) options.tell(text);
			}
		});
		this.#sender = new Sender(this.#spool, uplink, { refused: (text, why) => void this.#putAside(text, why) });
		this.#port = openLinePort(
			options.port,
			{
				lines: (lines, at) => this.#take(lines, at),
				opened: (path) => {
					options.tell(`The winder is read at ${path}.`);
					this.#ask();
				},
				lost: () => options.tell('The cable was pulled, or the winder lost its supply. It is looked for.'),
				trouble: (trouble) => {
					if (trouble) options.tell(trouble.text);
				}
			},
			options.places
		);
	}

	state(): BridgeState {
		const mark = this.#mark();
		return {
			port: this.#port.state(),
			server: { linked: this.#sender.linked, trouble: this.#serverTrouble, behind: this.#sender.behind },
			spool: this.#spool.state(),
			boot: mark && { b: mark.b, n: mark.n, e: mark.e },
			refused: this.#refused
		};
	}

	/** Keeps what was heard, acknowledges it, closes port and link. Afterwards everything acknowledged is on disk. */
	async stop(): Promise<void> {
		this.#stopping = true;
		this.#keep([]);
		await this.#keeping;
		await this.#port.close();
		this.#keep([]);
		await this.#keeping;
		await this.#sender.close();
		await this.#spool.close();
	}

	#ask(): void {
		this.#port.write([formatLine({ verb: '?' })]);
	}

	#mark(): BootMark | null {
		return this.#boot === null ? null : this.#spool.boots.of(this.#boot);
	}

	#take(heard: readonly HeardLine[], at: number): void {
		const now: Item[] = [];
		const kept: SpooledLine[] = [];
		let urgent = false;
		let again = false;
		for (const { text, parsed } of heard) {
			// What is spoilt shows as a gap, and ticks need none.
			if (!parsed.ok || !parsed.line) continue;
			const { line } = parsed;
			if (line.b !== undefined && line.verb !== 'NO') this.#boot = line.b;
			if (line.verb === 'OK' || line.verb === 'NO') {
				if (this.#answered(line)) now.push({ seq: null, at, text: text.trim(), line });
				continue;
			}
			if (line.verb === 'E' && this.#spool.boots.hasEvent(line.b, line.e)) {
				// Its acknowledgement was lost.
				again = true;
				continue;
			}
			const [spooled] = this.#spool.number([{ at, text: text.trim(), line }]);
			kept.push(spooled!);
			now.push(spooled!);
			if (line.verb !== 'T') urgent = true;
		}
		this.#sender.push(now);
		this.#ticks.push(...kept);
		if (urgent) this.#keep([]);
		else if (this.#ticks.length > 0) this.#timer ??= setTimeout(() => this.#keep([]), tickSyncMs);
		if (again) this.#acknowledge();
		this.#mindGap();
	}

	/** Brings what waits to the disk, and acknowledges it. */
	#keep(more: SpooledLine[]): void {
		if (this.#timer) clearTimeout(this.#timer);
		this.#timer = null;
		const lines = [...this.#ticks.splice(0), ...more];
		if (lines.length === 0) return;
		this.#keeping = this.#spool.append(lines).then((kept) => {
			this.#tellSpool();
			if (kept) this.#acknowledge();
		});
	}

	#tellSpool(): void {
		const { keeping, reason } = this.#spool.state();
		const text = keeping === 'yes' ? '' : `${whyNotKept(keeping, reason)} ${notKeptMeans}`;
		if (text === this.#spoolTrouble) return;
		this.#spoolTrouble = text;
		this.#options.tell(text === '' ? 'The spool takes lines again.' : text);
	}

	#acknowledge(): void {
		const mark = this.#mark();
		if (mark && (mark.n > 0 || mark.e > 0)) {
			this.#port.write([formatLine({ verb: 'ACK', b: mark.b, n: mark.n, e: mark.e })]);
		}
	}

	/** The server has more than is here where the disk refused: the winder need not keep it either. */
	#acked(b: string, n: number, e: number): void {
		this.#sender.acked(b, e);
		const mark = this.#spool.boots.of(b);
		if (mark && n <= mark.n && e <= mark.e) return;
		if (!mark) {
			// Not one line of this boot could be kept here.
			if (b === this.#boot) this.#port.write([formatLine({ verb: 'ACK', b, n, e })]);
			return;
		}
		this.#spool.boots.stored(b, n, e);
		if (b === this.#boot) this.#acknowledge();
	}

	// ---- gaps

	#mindGap(): void {
		const mark = this.#mark();
		if (!mark || !hasGap(mark)) return;
		const now = performance.now();
		let asked = this.#asked;
		if (asked?.b !== mark.b || asked.e !== mark.e)
			asked = this.#asked = { b: mark.b, e: mark.e, times: 0, atMs: 0, goneAtMs: null };
		if (asked.goneAtMs !== null) {
			if (now - asked.goneAtMs < goneMs) return;
			this.#spool.boots.gone(mark.b);
			this.#asked = null;
			return this.#acknowledge();
		}
		const waitMs = asked.times === 0 ? 0 : syncAgainMs * 2 ** (asked.times - 1);
		if (asked.times >= syncMax || now - asked.atMs < waitMs) return;
		if (this.#port.write([formatLine({ verb: 'SYNC', b: mark.b, e: mark.e })])) {
			asked.times += 1;
			asked.atMs = now;
		}
	}

	/** Whether an answer of the winder's is for the server. */
	#answered(line: Answer): boolean {
		if (line.verb === 'OK' || line.why !== 'gone') return true;
		if (this.#asked?.b === line.b) this.#asked.goneAtMs ??= performance.now();
		// The server would give up events that are still on their way to it from here.
		return this.#serverAsks.delete(line.b);
	}

	// ---- what the server says

	async #hear(texts: readonly string[]): Promise<void> {
		for (const text of texts) {
			const parsed = parseHostLine(text);
			if (!parsed.ok) {
				if (parsed.why === 'verb') this.#port.write([text.trim()]);
				continue;
			}
			if (!parsed.line || parsed.line.verb === 'ACK' || parsed.line.verb === 'HOLD') continue;
			if (parsed.line.verb === 'SYNC') await this.#synchronise(parsed.line.b, parsed.line.e, text.trim());
			else this.#port.write([text.trim()]);
		}
	}

	async #synchronise(b: string, e: number, text: string): Promise<void> {
		if (await this.#sender.sendAgain(b, e)) return;
		if (b === this.#boot) {
			if (this.#port.write([text])) this.#serverAsks.add(b);
			return;
		}
		// Nobody has the events of a boot that is over, but for this spool.
		if (this.#boot === null) return;
		const line: Answer = { verb: 'NO', b, why: 'gone' };
		this.#sender.push([{ seq: null, at: Date.now(), text: formatLine(line), line }]);
	}

	async #putAside(text: string, why: string): Promise<void> {
		this.#refused += 1;
		const file = join(this.#options.folder, 'refused.txt');
		this.#options.tell(`The server refused a line (${why}): ${text}. It is kept in ${file}.`);
		const size = await stat(file).then(
			(found) => found.size,
			() => 0
		);
		if (size < asideBytesMax) await appendFile(file, `${new Date().toISOString()} ${why} ${text}\n`).catch(() => {});
	}
}

const notKeptMeans = 'New lines are not kept and not acknowledged: the winder keeps its own.';

function whyNotKept(keeping: SpoolState['keeping'], reason: string | null): string {
	if (keeping === 'failing') return `The spool cannot be written (${reason}).`;
	return reason === 'limit'
		? 'The spool is full of events that the server has not taken: bring the server back, or give --spool-max more.'
		: 'The disk is full. Make room.';
}
