import {
	crc16Ibm3740,
	crcText,
	formatLine,
	lineBytesMax,
	parseDeviceLine,
	withChecksum,
	type DeviceLine,
	type Event,
	type SetPlan
} from '../../src/lib/turnline/index.ts';
import type { Carrier } from './carrier.ts';
import { againMsMax, answerMsMax, quietMs, syncMsMax, type Level } from './rules.ts';
import type { Entry, Probe, Session } from './session.ts';

/** Plays the host in front of a winder so that every rule comes up, and records what was said. It judges nothing. */

/** The whole of a session, a person's hand included. */
export const sessionMsMax = 45_000;
/** A board that was reset by the opening of its port speaks within this. */
const birthMsMax = 5_000;
/** Three ticks of a winder that stands. */
const standingMs = 3_200;
const turnMsMax = 15_000;
export const turnsAsked = 10;
/** A person counts less well than the winder. */
const turnsEnough = 8;
/** Without ticks in between it stands. */
const stillMs = 1_500;
/** A step of 2^30 leads out of the half of all numbers that lies behind in two tries. */
const idTriesMax = 3;
/** Where nothing must be answered, so long is listened. */
const silenceMs = answerMsMax + 50;

export interface PlayOptions {
	level: Level;
	/** Number of the first command; greater than that of any command the winder may have heard in this boot. */
	firstId: number;
	/** What a person must do, and what is going on. */
	tell(text: string): void;
	sessionMsMax?: number;
}

class TimeOver extends Error {}

export async function play(carrier: Carrier, options: PlayOptions): Promise<Session> {
	const host = new Host(carrier, options);
	try {
		await script(host, options);
	} catch (error) {
		if (!(error instanceof TimeOver)) throw error;
		host.collect();
	}
	return { entries: host.entries, endedMs: carrier.nowMs() };
}

/** The other end of the line, with what it knows of the winder. */
class Host {
	readonly entries: Entry[] = [];
	readonly heard: { no: number; atMs: number; line: DeviceLine }[] = [];
	boot: string | null = null;
	/** Totals and numbers of now. */
	n = 0;
	e = 0;
	f = 0;
	v = 0;
	r = 0;
	/** When the totals grew last. */
	grewMs = 0;
	/** What the winder is told that is stored. */
	ackedEvents = 0;

	readonly #carrier: Carrier;
	readonly #endMs: number;

	constructor(carrier: Carrier, options: PlayOptions) {
		this.#carrier = carrier;
		this.#endMs = options.sessionMsMax ?? sessionMsMax;
	}

	get turns(): number {
		return this.f + this.v;
	}
	get net(): number {
		return this.f - this.v;
	}
	get nowMs(): number {
		return this.#carrier.nowMs();
	}

	/** Whether the spindle was turned without a person. */
	async turn(turns: number): Promise<boolean> {
		if (!this.#carrier.turn) return false;
		await this.#carrier.turn(turns);
		return true;
	}

	note(text: string): void {
		this.#record({ atMs: this.nowMs, from: 'note', text });
	}

	/** Sends a line; answers its number in the record. */
	say(text: string, probe?: Probe): number {
		const no = this.#record({ atMs: this.nowMs, from: 'host', text, ...(probe && { probe }) });
		this.#carrier.send([text]);
		return no;
	}

	/** What came meanwhile. */
	collect(): void {
		let counted = false;
		for (const heard of this.#carrier.take()) {
			const no = this.#record(heard);
			if (heard.from !== 'winder' || heard.dropped) continue;
			const parsed = parseDeviceLine(heard.text);
			if (!parsed.ok || !parsed.line) continue;
			this.heard.push({ no, atMs: heard.atMs, line: parsed.line });
			counted ||= this.#learn(parsed.line, heard.atMs);
		}
		if (counted && this.#carrier.wantsAcks && this.boot !== null)
			this.say(formatLine({ verb: 'ACK', b: this.boot, n: this.n, e: this.ackedEvents }));
	}

	/** Listens until `done`, or for so long. Answers whether it was done. Throws TimeOver at the end of the session. */
	async until(ms: number, done: () => boolean): Promise<boolean> {
		const endMs = this.nowMs + ms;
		for (;;) {
			this.collect();
			if (done()) return true;
			const leftMs = Math.min(endMs, this.#endMs) - this.nowMs;
			if (this.nowMs >= this.#endMs || this.#carrier.gone() !== null) throw new TimeOver();
			if (leftMs <= 0) return false;
			await this.#carrier.pass(leftMs);
		}
	}

	wait(ms: number): Promise<boolean> {
		return this.until(ms, () => false);
	}

	/** Until a line behind the record's `no` is one of these. */
	answer(no: number, ms: number, is: (line: DeviceLine) => boolean): Promise<boolean> {
		return this.until(ms, () => this.heard.some((heard) => heard.no > no && is(heard.line)));
	}

	async ask(probe?: Probe): Promise<boolean> {
		return this.answer(this.say('?', probe), answerMsMax, ({ verb }) => verb === 'HI');
	}

	async command(text: string, id: number, probe?: Probe): Promise<void> {
		const no = this.say(text, probe);
		await this.answer(no, answerMsMax, (line) => (line.verb === 'OK' || line.verb === 'NO') && line.id === id);
	}

	isOvertaken(id: number): boolean {
		return this.heard.some(({ line }) => line.verb === 'NO' && line.id === id && line.why === 'old');
	}

	/** Events of this boot, each once. */
	events(after = 0): Event[] {
		const found = new Map<number, Event>();
		for (const { line } of this.heard)
			if (line.verb === 'E' && line.b === this.boot && line.e > after && !found.has(line.e)) found.set(line.e, line);
		return [...found.values()];
	}

	/** How often an event came. */
	times(event: Event, behind = 0): number {
		return this.heard.filter(({ no, line }) => no > behind && line.verb === 'E' && line.e === event.e).length;
	}

	#record(entry: Omit<Entry, 'no'>): number {
		this.entries.push({ no: this.entries.length + 1, ...entry });
		return this.entries.length;
	}

	/** Answers whether it was a line with totals. */
	#learn(line: DeviceLine, atMs: number): boolean {
		if (line.b !== undefined) this.boot ??= line.b;
		if (!('f' in line)) return false;
		const before = this.turns;
		this.n = Math.max(this.n, line.n);
		this.e = Math.max(this.e, line.e);
		this.f = Math.max(this.f, line.f);
		this.v = Math.max(this.v, line.v);
		if (this.turns > before) this.grewMs = atMs;
		if (line.verb === 'T') this.r = line.r;
		else if (line.verb === 'E' && line.k === 'stop') this.r = 0;
		return true;
	}
}

async function script(host: Host, { level, firstId, tell }: PlayOptions): Promise<void> {
	const full = level === 'full';
	await host.until(birthMsMax, () => host.heard.length > 0);
	await host.ask();
	tell('Listening to the winder standing still. Do not touch the spindle.');
	await host.wait(standingMs);
	const b = host.boot;
	if (b === null) return;
	/** Events of before belong to another host: they are not waited for. */
	const known = host.e;
	host.ackedEvents = known;

	const plan = (id: number, more: Partial<SetPlan> = {}): string =>
		formatLine({ verb: 'SET', id, b, tgt: host.net + 8000, look: 500, ease: 40, stop: 3, from: host.net, ...more });
	let idBase = firstId;
	const id = (step: number) => (idBase + step) % 2 ** 32;

	tell('Asking for plans, and for things that must be refused.');
	for (let tries = 0; tries < idTriesMax; tries++) {
		await host.command(plan(id(10)), id(10));
		if (!host.isOvertaken(id(10))) break;
		// Another host of this boot counted further: numbers go on well beyond it.
		idBase += 2 ** 30;
	}
	await host.command(plan(id(10)), id(10));
	const other = `${b[0] === '0' ? '1' : '0'}${b.slice(1)}`;
	await host.command(plan(id(12), { b: other }), id(12));
	if (full) {
		await host.command(withChecksum(`${plan(id(20)).slice(0, -6)} zq=1`), id(20), 'unknown-key');
		await host.command(plan(id(2), { tgt: host.net + 3000 }), id(2), 'overtaken');
		// For another boot: nothing is asked to stop.
		await host.command(formatLine({ verb: 'STOP', id: id(24), b: other }), id(24));
		await host.answer(host.say(withChecksum('LAMP on=1'), 'unknown-verb'), answerMsMax, ({ verb }) => verb === 'NO');
		await nothingToHeed(host, plan, id);
	}
	await turning(host, { plan, id, full, tell });
	await delivery(host, { b, known, full, tell });

	// The next coil: its zero is the host's knowledge, the totals go on.
	await host.command(plan(id(60)), id(60));
	await host.ask();
	tell('Listening whether what was acknowledged stays quiet.');
	await host.wait(quietMs + 100);
	await host.ask();
}

type Plan = (id: number, more?: Partial<SetPlan>) => string;
type Id = (step: number) => number;

/** Lines that must not be acted on. */
async function nothingToHeed(host: Host, plan: Plan, id: Id): Promise<void> {
	const wrong = plan(id(30)).slice(0, -6);
	host.say(`${wrong} ~${crcText(crc16Ibm3740(wrong) ^ 0x0101)}`, 'spoilt');
	host.say(plan(id(31)).slice(0, -6), 'spoilt');
	await host.wait(silenceMs);
	const long = `${plan(id(32)).slice(0, -6)} zq=${'1'.repeat(lineBytesMax)}`;
	host.say(withChecksum(long), 'dropped');
	await host.ask('after-dropped');
	host.say(withChecksum(`${plan(id(33)).slice(0, -6)} zq=\u00ff`), 'dropped');
	await host.ask('after-dropped');
}

interface Turning {
	plan: Plan;
	id: Id;
	full: boolean;
	tell(text: string): void;
}

async function turning(host: Host, { plan, id, full, tell }: Turning): Promise<void> {
	const coil = { look: 0, ease: 0, stop: 0 };
	const from = host.net;
	await host.command(plan(id(40), { ...coil, tgt: from + 4 }), id(40));
	// The same number with another content is the same command.
	if (full) await host.command(plan(id(40), { ...coil, tgt: from + 7 }), id(40));
	const before = host.turns;
	const askedMs = host.nowMs;
	const asked = `Turn the spindle by hand about ${turnsAsked} turns now, forward, then let it stand.`;
	host.note(asked);
	if (!(await host.turn(turnsAsked)))
		tell(
			`${asked} Waiting ${turnMsMax / 1000} s at most; it goes on by itself once they are counted and the spindle stands.`
		);
	await host.until(turnMsMax, () => {
		const still = host.r === 0 && host.nowMs - Math.max(host.grewMs, askedMs) >= stillMs;
		return host.turns - before >= turnsEnough && still;
	});
	const counted = host.turns - before;
	tell(counted === 0 ? 'No turn was counted.' : `${counted} turns were counted.`);
}

interface Delivery {
	b: string;
	/** Events of before the session. */
	known: number;
	full: boolean;
	tell(text: string): void;
}

async function delivery(host: Host, { b, known, full, tell }: Delivery): Promise<void> {
	const ack = (e: number) => {
		host.ackedEvents = e;
		host.say(formatLine({ verb: 'ACK', b, n: host.n, e }));
	};
	const sync = async (e: number) => {
		const no = host.say(formatLine({ verb: 'SYNC', b, e }));
		const needed = host.events(e);
		const came = (event: Event) => host.times(event, no) > 0;
		// What was acknowledged may be gone; the rest comes, NO or not.
		const owed = needed.filter((event) => event.e > host.ackedEvents);
		const refused = () => host.heard.some((heard) => heard.no > no && heard.line.verb === 'NO');
		if (needed.length > 0) await host.until(syncMsMax, () => owed.every(came) && (needed.every(came) || refused()));
	};
	const events = host.events(known);
	if (full && events.length > 0) {
		tell('Waiting for events that were not acknowledged to come again.');
		await host.until(againMsMax + 100, () => events.every((event) => host.times(event) > 1));
	}
	ack(known);
	await host.wait(100);
	await sync(known);
	if (host.e > known) {
		ack(known + 1);
		await host.wait(100);
		await sync(known);
	}
	ack(host.e);
}
