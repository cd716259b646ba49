import { spawn, type ChildProcessByStdio } from 'node:child_process';
import { join } from 'node:path';
import type { Readable, Writable } from 'node:stream';
import { inject } from 'vitest';
import {
	formatLine,
	parseDeviceLine,
	type DeviceLine,
	type Event,
	type HostLine,
	type Tick
} from '../../src/lib/turnline/index.ts';

/** What the core sent and said up to a mark. */
export interface Heard {
	lines: DeviceLine[];
	/** The same lines as they came. */
	texts: string[];
	/** The events among them that were not heard before, by their number. */
	events: Event[];
	/** Changes of cue and stop output, as "cue ease" or "stop 1". */
	reports: string[];
	b: string;
	f: number;
	v: number;
	net: number;
	/** Lines in the ring. */
	kept: number;
}

export const isEvent = (line: DeviceLine): line is Event => line.verb === 'E';
export const isTick = (line: DeviceLine): line is Tick => line.verb === 'T';
export const kindsOf = (lines: DeviceLine[]) => lines.filter(isEvent).map((event) => event.k);
/** What a plan's marks call, as kind and net turns. */
export const marksOf = (events: Event[]) =>
	events
		.filter((event) => ['ease', 'look', 'at', 'over'].includes(event.k))
		.map(({ k, f, v }): [string, number] => [k, f - v]);

const kinds = { tick: 0, go: 1, stop: 2, rev: 3, ease: 4, look: 5, at: 6, over: 7, btn: 8, bufov: 9 };
export const kindNumber = (kind: keyof typeof kinds) => kinds[kind];

/** The core as a program, told its edges and its time. Times are milliseconds of its own; it runs as fast as it can. */
export class Board {
	nowMs = 0;
	/** Every event ever heard, by its number. */
	readonly events = new Map<string, Event>();

	readonly #child: ChildProcessByStdio<Writable, Readable, Readable>;
	readonly #ended: Promise<number | null>;
	#orders: string[] = [];
	#held = '';
	#rows: string[] = [];
	#errors = '';
	#wake: () => void = () => {};
	#marks = 0;

	constructor(options: string[] = [], ringLines: 32 | 256 = 32) {
		const program = join(inject('firmware'), `winder-${ringLines}`);
		this.#child = spawn(program, ['--script', '--boot', '5C0E91A7', ...options], { stdio: ['pipe', 'pipe', 'pipe'] });
		this.#child.stdout.setEncoding('latin1').on('data', (chunk: string) => {
			const parts = (this.#held + chunk).split('\n');
			this.#held = parts.pop()!;
			this.#rows.push(...parts);
			this.#wake();
		});
		this.#child.stderr.setEncoding('utf8').on('data', (chunk: string) => (this.#errors += chunk));
		this.#child.stdin.on('error', () => {});
		this.#ended = new Promise((resolve) =>
			this.#child.on('close', (code) => {
				resolve(code);
				this.#wake();
			})
		);
	}

	/** An order at the time it is now. */
	order(what: string): void {
		this.#orders.push(`${Math.round(this.nowMs * 1000)} ${what}`);
	}

	wait(ms: number): void {
		this.nowMs += ms;
		this.order('time');
	}

	say(line: HostLine | string): void {
		this.order(`say ${typeof line === 'string' ? line : formatLine(line)}`);
	}

	/** One magnet passes both sensors, forward or back; the passage fills a tenth of the period. */
	turn(periodMs = 100, forward = true): void {
		this.nowMs += periodMs * 0.9;
		for (const levels of forward ? [1, 3, 2, 0] : [2, 3, 1, 0]) {
			this.nowMs += periodMs * 0.025;
			this.order(`levels ${levels}`);
		}
		this.order('time');
	}

	turns(count: number, periodMs = 100, forward = true): void {
		for (let turn = 0; turn < count; turn++) this.turn(periodMs, forward);
	}

	/** Waits until all of that was done, and answers what came since the mark before. Each line must be one. */
	async mark(): Promise<Heard> {
		const word = `m${++this.#marks}`;
		this.order(`mark ${word}`);
		this.#child.stdin.write(`${this.#orders.join('\n')}\n`);
		this.#orders = [];
		const isMark = (row: string) => row.startsWith(`# mark ${word} `);
		let running = true;
		void this.#ended.then(() => (running = false));
		while (!this.#rows.some(isMark)) {
			if (!running) throw new Error(`the core ended: ${this.#errors}`);
			await new Promise<void>((resolve) => (this.#wake = resolve));
		}
		const at = this.#rows.findIndex(isMark);
		const rows = this.#rows.splice(0, at + 1);
		const [, b, f, v, kept] = / b=(\w+) f=(\d+) v=(\d+) kept=(\d+)$/.exec(rows.pop()!)!;
		const texts = rows.filter((row) => !row.startsWith('#'));
		const lines = texts.map(read);
		const events: Event[] = [];
		for (const event of lines.filter(isEvent)) {
			const key = `${event.b} ${event.e}`;
			if (!this.events.has(key)) events.push(event);
			this.events.set(key, event);
		}
		events.sort((one, other) => one.e - other.e);
		const reports = rows.filter((row) => row.startsWith('#')).map((row) => row.slice(2));
		return {
			lines,
			texts,
			events,
			reports,
			b: b!,
			f: Number(f),
			v: Number(v),
			net: Number(f) - Number(v),
			kept: Number(kept)
		};
	}

	/** Ends the program; it must have nothing to complain about. */
	async end(): Promise<void> {
		this.#child.stdin.end();
		const code = await this.#ended;
		if (code !== 0) throw new Error(`the core ended with ${code}: ${this.#errors}`);
	}
}

function read(text: string): DeviceLine {
	const parsed = parseDeviceLine(text);
	if (!parsed.ok || !parsed.line) throw new Error(`not a line: ${text}: ${JSON.stringify(parsed)}`);
	return parsed.line;
}

/** A board for one test, ended after it also when the test fails. */
export async function withBoard(
	options: string[],
	work: (board: Board) => Promise<void>,
	ringLines: 32 | 256 = 32
): Promise<void> {
	const board = new Board(options, ringLines);
	let failed = true;
	try {
		await work(board);
		failed = false;
	} finally {
		// What the test found wrong is told before what the core says at its end.
		if (failed) await board.end().catch(() => {});
		else await board.end();
	}
}
