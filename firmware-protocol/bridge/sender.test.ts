import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { formatLine, type DeviceLine } from '../../src/lib/turnline/index.ts';
import { Sender } from './sender.ts';
import { Spool } from './spool.ts';
import type { Outcome, Outgoing, Uplink } from './uplink.ts';

const first = '5C0E91A7';
const second = '77AA01F3';
const totals = (b: string, n: number, e: number) => ({ b, n, e, f: n, v: 0, t: n * 100 });
const tick = (n: number, e = 0, b = first): DeviceLine => ({ verb: 'T', ...totals(b, n, e), r: 60 });
const event = (n: number, e: number, b = first): DeviceLine => ({ verb: 'E', ...totals(b, n, e), k: 'look' });
const hi = (b: string, e = 0): DeviceLine => ({ verb: 'HI', p: 1, dev: 'w-01', ...totals(b, 0, e) });

/** A server that answers when it is told to. */
class Server implements Uplink {
	readonly linesMax = 50;
	readonly pollMs = null;
	readonly messages: string[][] = [];
	readonly peeked: string[] = [];
	#answer: ((outcome: Outcome) => void) | null = null;
	#waiting: (() => void)[] = [];

	constructor(readonly takenIsStored: boolean) {}

	send(lines: readonly Outgoing[]): Promise<Outcome> {
		this.messages.push(lines.map(({ text }) => text));
		return new Promise((resolve) => {
			this.#answer = resolve;
			for (const wake of this.#waiting.splice(0)) wake();
		});
	}

	peek(lines: readonly Outgoing[]): void {
		this.peeked.push(...lines.map(({ text }) => text));
	}

	/** The message that waits for its answer. */
	async asked(): Promise<string[]> {
		while (!this.#answer) await new Promise<void>((resolve) => this.#waiting.push(resolve));
		return this.messages.at(-1)!;
	}

	answer(outcome: Outcome = { kind: 'taken', refused: [] }): void {
		const answer = this.#answer;
		this.#answer = null;
		answer?.(outcome);
	}

	async close(): Promise<void> {
		this.answer({ kind: 'lost' });
	}
}

let folder: string;
let spool: Spool;
let sender: Sender;
let server: Server;
let refused: string[];
let at: number;

beforeEach(async () => {
	folder = mkdtempSync(join(tmpdir(), 'turnstead-sender-'));
	spool = await Spool.open({ folder });
	refused = [];
	at = 1_796_133_600_000;
});
afterEach(async () => {
	await sender.close();
	await spool.close();
	rmSync(folder, { recursive: true });
});

function begin(takenIsStored: boolean): void {
	server = new Server(takenIsStored);
	sender = new Sender(spool, server, { refused: (text, why) => void refused.push(`${why} ${text}`) });
}

/** The winder says this, `apartMs` apart. */
async function hear(lines: DeviceLine[], apartMs = 100): Promise<void> {
	const numbered = spool.number(lines.map((line) => ({ at: (at += apartMs), text: formatLine(line), line })));
	sender.push(numbered);
	await spool.append(numbered);
}

const texts = (...lines: DeviceLine[]) => lines.map((line) => formatLine(line));

describe('what is brought to the server', () => {
	it('is what came while it was away, ticks one a second, and leaves the spool when it is taken', async () => {
		begin(true);
		await hear([hi(first), event(1, 1), ...Array.from({ length: 30 }, (_, i) => tick(i + 2, 1)), event(32, 2)]);
		expect(server.messages).toEqual([]);
		sender.linkUp();
		expect(await server.asked()).toEqual(
			texts(hi(first), event(1, 1), tick(2, 1), tick(12, 1), tick(22, 1), event(32, 2))
		);
		expect(spool.freedSeq).toBe(1);
		server.answer();
		await hear([tick(33, 2)]);
		expect(await server.asked()).toEqual(texts(tick(33, 2)));
		expect(spool.freedSeq).toBe(34);
		server.answer();
	});

	it('is what the winder says now before what lies in the spool', async () => {
		begin(true);
		await hear([hi(first), ...Array.from({ length: 60 }, (_, i) => event(i + 1, i + 1))]);
		sender.linkUp();
		expect(await server.asked()).toHaveLength(50);
		await hear([tick(100, 60)]);
		server.answer();
		expect((await server.asked())[0]).toBe(formatLine(tick(100, 60)));
		expect(server.messages[1]).toHaveLength(12);
		server.answer();
	});

	it('is every line of an earlier boot before any of a later one', async () => {
		begin(true);
		await hear([hi(first), event(1, 1), hi(second), event(1, 1, second)]);
		sender.linkUp();
		await hear([tick(2, 1, second)]);
		expect(await server.asked()).toEqual(texts(hi(first), event(1, 1)));
		server.answer();
		expect(await server.asked()).toEqual(texts(tick(2, 1, second), hi(second), event(1, 1, second)));
		server.answer();
	});

	it('goes again when nothing of it was taken', async () => {
		begin(true);
		await hear([hi(first), event(1, 1)]);
		sender.linkUp();
		const asked = await server.asked();
		server.answer({ kind: 'later', ms: 1 });
		expect(await server.asked()).toEqual(asked);
		expect(spool.freedSeq).toBe(1);
		server.answer();
	});

	it('goes again on the next link when nobody knows what became of it', async () => {
		begin(true);
		await hear([hi(first), event(1, 1)]);
		sender.linkUp();
		const asked = await server.asked();
		sender.linkDown();
		server.answer({ kind: 'lost' });
		await hear([event(2, 2)]);
		expect(spool.freedSeq).toBe(1);
		sender.linkUp();
		expect(await server.asked()).toEqual([...asked, ...texts(event(2, 2))]);
		server.answer();
	});

	it('keeps an event until its own acknowledgement where that alone says it is stored', async () => {
		begin(false);
		sender.linkUp();
		await hear([event(1, 1), event(2, 2)]);
		await server.asked();
		server.answer();
		await hear([tick(3, 2)]);
		await server.asked();
		server.answer();
		await hear([tick(4, 2)]);
		await server.asked();
		expect(spool.freedSeq).toBe(1);
		sender.acked(first, 1);
		await hear([]);
		server.answer();
		await hear([tick(5, 2)]);
		await server.asked();
		expect(spool.freedSeq).toBe(2);
		// It asks for the other, which is still here.
		expect(await sender.sendAgain(first, 1)).toBe(true);
		server.answer();
		expect(await server.asked()).toEqual(texts(event(2, 2)));
		sender.acked(first, 2);
		server.answer();
		await hear([tick(6, 2)]);
		await server.asked();
		expect(await sender.sendAgain(first, 1)).toBe(false);
	});

	it('finds the events a server asks for also where they wait in the spool', async () => {
		begin(false);
		await hear(Array.from({ length: 120 }, (_, i) => event(i + 1, i + 1)));
		sender.linkUp();
		expect(await server.asked()).toHaveLength(50);
		expect(await sender.sendAgain(first, 110)).toBe(true);
		expect(await sender.sendAgain(first, 120)).toBe(false);
		expect(await sender.sendAgain(second, 0)).toBe(false);
	});

	it('does not wait for a line the server refuses', async () => {
		begin(true);
		sender.linkUp();
		await hear([event(1, 1), tick(2, 1)]);
		await server.asked();
		server.answer({ kind: 'taken', refused: [{ at: 0, why: 'range' }] });
		await hear([tick(3, 1)]);
		await server.asked();
		expect(refused).toEqual([`range ${formatLine(event(1, 1))}`]);
		expect(spool.freedSeq).toBe(3);
		server.answer();
	});

	it('an hour of it, beside a winder that goes on, stays within what a server lets through', async () => {
		begin(true);
		const hour = Array.from({ length: 36_000 }, (_, i) => tick(i + 1));
		for (let from = 0; from < hour.length; from += 1_000) await hear(hour.slice(from, from + 1_000));
		sender.linkUp();
		let sent = 0;
		for (let n = 36_001; n <= 36_050; n += 1) {
			await server.asked();
			await hear([tick(n)]);
			sent += server.messages.at(-1)!.length;
			server.answer();
			// The line of now is in the very next message, however long the spool is.
			expect((await server.asked())[0]).toBe(formatLine(tick(n)));
		}
		// One tick a second of that hour at most, and no more at once than the burst a server takes.
		expect(sent).toBeLessThan(600);
		expect(sender.behind).toBeGreaterThan(0);
		server.answer();
	});
});
