import { spawn, type SpawnOptions } from 'node:child_process';
import { readFileSync } from 'node:fs';

export interface Ran {
	code: number | null;
	output: string;
}

/** Runs a program to its end and collects what it printed. Throws only when it cannot be started. */
export function run(command: string, args: string[], options: SpawnOptions = {}): Promise<Ran> {
	return new Promise((resolve, reject) => {
		const child = spawn(command, args, { stdio: ['ignore', 'pipe', 'pipe'], ...options });
		let output = '';
		child.stdout?.on('data', (chunk: Buffer) => (output += chunk.toString()));
		child.stderr?.on('data', (chunk: Buffer) => (output += chunk.toString()));
		child.on('error', reject);
		// Not 'close': a daemon that was started may keep the pipes open for as long as it lives.
		child.on('exit', (code) => resolve({ code, output }));
	});
}

export function isAlive(pid: number): boolean {
	try {
		process.kill(pid, 0);
		return true;
	} catch (error) {
		return (error as NodeJS.ErrnoException).code === 'EPERM';
	}
}

/** The words of a process's command line; empty when it is gone. */
export function commandLine(pid: number): string[] {
	try {
		return readFileSync(`/proc/${pid}/cmdline`, 'utf8').split('\0').filter(Boolean);
	} catch {
		return [];
	}
}

/** When a process began, in ticks since the machine did: with its number, the one sure name of a process. */
export function startTicks(pid: number): string | null {
	try {
		const stat = readFileSync(`/proc/${pid}/stat`, 'utf8');
		// The name in parentheses may hold spaces; the start time is the 20th field after it.
		return stat.slice(stat.lastIndexOf(')') + 2).split(' ')[19] ?? null;
	} catch {
		return null;
	}
}

export const sleep = (ms: number): Promise<void> => new Promise((resolve) => setTimeout(resolve, ms));

/** Asks `done` again every `everyMs` until it says yes or `msMax` has passed. */
export async function until(done: () => boolean | Promise<boolean>, msMax: number, everyMs = 50): Promise<boolean> {
	const end = Date.now() + msMax;
	for (;;) {
		if (await done()) return true;
		if (Date.now() >= end) return false;
		await sleep(everyMs);
	}
}
