import { randomBytes } from 'node:crypto';
import { chmodSync, existsSync, mkdirSync, readFileSync, renameSync, rmSync, writeFileSync } from 'node:fs';
import { dirname, join, resolve } from 'node:path';
import { fileURLToPath } from 'node:url';
import { PlainError, codeOf } from './plain-error.ts';
import { isAlive, startTicks, until } from './processes.ts';

/** What belongs to this clone and to no repository: `.data/`, readable only by its owner. */

export const projectFolder = resolve(dirname(fileURLToPath(import.meta.url)), '../..');
export const dataFolder = join(projectFolder, '.data');

/** Makes `.data/`. Throws PlainError when it cannot be written. */
export function ensureDataFolder(): void {
	try {
		mkdirSync(dataFolder, { recursive: true, mode: 0o700 });
		chmodSync(dataFolder, 0o700);
	} catch (error) {
		throw unwritable(dataFolder, error);
	}
}

export function readData(name: string): string | null {
	try {
		return readFileSync(join(dataFolder, name), 'utf8');
	} catch (error) {
		if (codeOf(error) === 'ENOENT') return null;
		throw new PlainError(
			`${join(dataFolder, name)} cannot be read (${codeOf(error)}). It belongs to whoever started Turnstead here first: ` +
				'start it as that user.'
		);
	}
}

/** Writes a file of `.data/` whole or not at all, readable only by its owner. */
export function writeData(name: string, text: string): void {
	const file = join(dataFolder, name);
	try {
		writeFileSync(`${file}.new`, text, { mode: 0o600 });
		renameSync(`${file}.new`, file);
	} catch (error) {
		throw unwritable(file, error);
	}
}

export function removeData(name: string): void {
	rmSync(join(dataFolder, name), { force: true });
}

function unwritable(file: string, error: unknown): PlainError {
	const code = codeOf(error);
	if (code === 'ENOSPC' || code === 'EDQUOT') {
		return new PlainError(`The disk is full: ${file} could not be written. Make room, then start again.`);
	}
	return new PlainError(
		`${file} cannot be written (${code || (error as Error).message}). ` +
			'Start as the user this folder belongs to, or give that user the right to write here.'
	);
}

/** Signs the sessions: made at the first start, so that people stay signed in over a restart. */
export function authSecret(): string {
	const kept = readData('auth-secret')?.trim();
	if (kept) return kept;
	const made = randomBytes(32).toString('base64url');
	writeData('auth-secret', `${made}\n`);
	return made;
}

interface Running {
	pid: number;
	ticks: string | null;
	url: string;
	stopping: boolean;
	/** The simulated winder's process, so that one left by a kill is not met again. */
	simulator: { pid: number; ticks: string | null } | null;
}

const RUNNING = 'running.json';
/** A start that is just ending is waited for this long. */
const STOPPING_MS_MAX = 15_000;

/** Which start of this clone is at work, if one is; what a killed one left is taken away. */
function running(): Running | null {
	const text = readData(RUNNING);
	if (text === null) return null;
	try {
		const found = JSON.parse(text) as Running;
		return isAlive(found.pid) && startTicks(found.pid) === found.ticks ? found : endLeftOver(found);
	} catch (error) {
		if (error instanceof SyntaxError) return null;
		throw error;
	}
}

function endLeftOver({ simulator }: Running): null {
	if (simulator !== null && simulator.ticks !== null && startTicks(simulator.pid) === simulator.ticks) {
		try {
			process.kill(simulator.pid, 'SIGKILL');
		} catch (error) {
			if (codeOf(error) !== 'ESRCH') throw error;
		}
	}
	removeData(RUNNING);
	return null;
}

/** Takes the place of the one start of this clone. Throws PlainError when another holds it. */
export async function takePlace(url: string): Promise<void> {
	const other = running();
	if (other?.stopping) await until(() => running() === null, STOPPING_MS_MAX);
	const still = running();
	if (still !== null) {
		throw new PlainError(
			`Turnstead already runs from this folder, at ${still.url} (process ${still.pid}). Nothing was started.\n` +
				`Stop it first with Ctrl-C in its terminal, or with:  kill ${still.pid}`
		);
	}
	notePlace({ url, stopping: false, simulator: null });
}

export function notePlace(more: Pick<Running, 'url' | 'stopping' | 'simulator'>): void {
	const mine: Running = { pid: process.pid, ticks: startTicks(process.pid), ...more };
	writeData(RUNNING, `${JSON.stringify(mine)}\n`);
}

export function leavePlace(): void {
	if (existsSync(join(dataFolder, RUNNING))) removeData(RUNNING);
}
