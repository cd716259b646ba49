import { spawn, type ChildProcess } from 'node:child_process';
import type { Readable, Writable } from 'node:stream';
import { Inbox, NoWinder, realClock, type Carrier } from './carrier.ts';

/** Winders that are programs. */

/** A program that does not end when its input ends is ended. */
const endMsMax = 1_000;
/** One step of a clock that is driven: short enough that an answer is seen at once. */
const stepMs = 50;
/** What a shell says of a program that it cannot start. */
const notStarted = [126, 127];
/** Hand speed: 150 revolutions a minute, so that ten turns make some forty ticks of 100 ms. */
const turnMs = 400;
/** So that the spindle is seen to stand: the longest the core waits. */
const standMs = 3_500;

type Program = ChildProcess & { stdin: Writable; stdout: Readable };

function start(command: string): { child: Program; ended: Promise<void>; gone: () => string | null } {
	// exec: what is ended later is the program, not its shell.
	const child = spawn('/bin/sh', ['-c', `exec ${command}`], { stdio: ['pipe', 'pipe', 'inherit'] }) as Program;
	let why: string | null = null;
	child.stdin.on('error', () => {});
	const ended = new Promise<void>((resolve) => {
		const end = (text: string) => {
			why ??= text;
			resolve();
		};
		child.on('error', (error) => end(`${command} could not be started: ${error.message}`));
		child.on('close', (code, signal) =>
			end(
				notStarted.includes(code ?? 0)
					? `${command} could not be started`
					: `the program ended (${signal ?? `exit code ${code}`})`
			)
		);
	});
	return { child, ended, gone: () => why };
}

async function end(child: Program, ended: Promise<void>): Promise<void> {
	child.stdin.end();
	const late = setTimeout(() => child.kill('SIGKILL'), endMsMax);
	await ended;
	clearTimeout(late);
}

/** A program that speaks the line on its standard input and output, by the clock of this computer. */
export function openExec(command: string): Carrier {
	const { child, ended, gone } = start(command);
	const nowMs = realClock();
	const inbox = new Inbox();
	inbox.add({ atMs: 0, from: 'link', text: 'the program was started' });
	child.stdout.on('data', (chunk: Buffer) => inbox.bytes(chunk, nowMs()));
	void ended.then(() => inbox.wake());
	return {
		wantsAcks: false,
		nowMs,
		gone,
		take: () => inbox.take(),
		send: (texts) => void child.stdin.write(Buffer.from(texts.map((text) => `${text}\n`).join(''), 'latin1')),
		pass: (ms) => (gone() === null ? inbox.sleep(ms) : Promise.resolve()),
		close: () => end(child, ended)
	};
}

/**
 * A program that is told its time, its edges and the host's lines on standard input, as core/host/winder.c --script is: its
 * session takes as long as it computes.
 */
export function openDriven(command: string): Carrier {
	const { child, ended, gone } = start(command);
	const inbox = new Inbox();
	let nowUs = 0;
	let orders: string[] = [];
	let marks = 0;
	let held = '';
	let awaited: { word: string; come: () => void } | null = null;
	inbox.add({ atMs: 0, from: 'link', text: 'the program was started' });
	child.stdout.setEncoding('latin1').on('data', (chunk: string) => {
		const parts = (held + chunk).split('\n');
		held = parts.pop()!;
		for (const part of parts) {
			if (awaited && part.startsWith(`# mark ${awaited.word} `)) awaited.come();
			else if (!part.startsWith('#')) inbox.bytes(Buffer.from(`${part}\n`, 'latin1'), nowUs / 1000);
		}
	});
	const order = (what: string) => orders.push(`${Math.round(nowUs)} ${what}\n`);
	const done = async () => {
		const word = `m${++marks}`;
		order(`mark ${word}`);
		const come = new Promise<void>((resolve) => (awaited = { word, come: resolve }));
		child.stdin.write(Buffer.from(orders.join(''), 'latin1'));
		orders = [];
		await Promise.race([come, ended]);
		awaited = null;
	};
	/** In short steps, so that each line has its time. */
	const go = async (ms: number) => {
		for (let leftMs = ms; leftMs > 0 && gone() === null; leftMs -= stepMs) {
			nowUs += Math.min(leftMs, stepMs) * 1000;
			order('time');
			await done();
		}
	};
	return {
		wantsAcks: false,
		nowMs: () => nowUs / 1000,
		gone,
		take: () => inbox.take(),
		send: (texts) => texts.forEach((text) => order(`say ${text}`)),
		pass: (ms) => go(Math.min(ms, stepMs)),
		async turn(turns) {
			for (let turn = 0; turn < turns; turn++) {
				await go(turnMs * 0.9);
				for (const levels of [1, 3, 2, 0]) {
					order(`levels ${levels}`);
					nowUs += turnMs * 25;
				}
				order('time');
				await done();
			}
			await go(standMs);
		},
		close: () => end(child, ended)
	};
}

/** Throws NoWinder when the program is gone before it said anything. */
export function mustHaveStarted(carrier: Carrier): void {
	const why = carrier.gone();
	if (why !== null && why.endsWith('could not be started')) throw new NoWinder(why);
}
