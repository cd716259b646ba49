import { link, readFile, rename, rm, writeFile } from 'node:fs/promises';
import { readFileSync } from 'node:fs';
import { join } from 'node:path';

/** One bridge a spool. The port itself is locked by the kernel as long as it is open; this holds while the cable is out, too. */

export interface Held {
	release(): Promise<void>;
}

/** null: another living bridge has it; `holder` tells its process. */
export async function takeLock(folder: string): Promise<{ ok: true; held: Held } | { ok: false; holder: number }> {
	const file = join(folder, 'lock');
	const mine = `${process.pid} ${startOf(process.pid) ?? '-'}\n`;
	const own = join(folder, `lock.${process.pid}`);
	await writeFile(own, mine, { mode: 0o600 });
	try {
		for (;;) {
			try {
				// Whole or not at all, and never over another's.
				await link(own, file);
				return { ok: true, held: { release: () => release(file, mine) } };
			} catch (error) {
				if ((error as NodeJS.ErrnoException).code !== 'EEXIST') throw error;
			}
			const holder = await living(file);
			if (holder !== null) return { ok: false, holder };
			// Left by one that was killed: moved away, and looked at once more, for another may have come first.
			const left = `${file}.left.${process.pid}`;
			try {
				await rename(file, left);
			} catch (error) {
				if ((error as NodeJS.ErrnoException).code === 'ENOENT') continue;
				throw error;
			}
			const alive = await living(left);
			if (alive !== null) await link(left, file).catch(() => {});
			await rm(left, { force: true });
			if (alive !== null) return { ok: false, holder: alive };
		}
	} finally {
		await rm(own, { force: true });
	}
}

async function release(file: string, mine: string): Promise<void> {
	if ((await readFile(file, 'utf8').catch(() => '')) === mine) await rm(file, { force: true });
}

/** The process that holds the lock, if it still is the one that took it. */
async function living(file: string): Promise<number | null> {
	const [pid, start] = (await readFile(file, 'utf8').catch(() => '')).trim().split(' ');
	const number = Number(pid);
	if (!Number.isInteger(number) || number <= 0) return null;
	const now = startOf(number);
	if (now !== null || start !== '-') return now === start ? number : null;
	// No /proc on this system: the number alone must do.
	try {
		process.kill(number, 0);
		return number;
	} catch (error) {
		return (error as NodeJS.ErrnoException).code === 'EPERM' ? number : null;
	}
}

/** When a process began, in ticks since the machine did: with its number, the one sure name of a process. */
function startOf(pid: number): string | null {
	try {
		const stat = readFileSync(`/proc/${pid}/stat`, 'utf8');
		return stat.slice(stat.lastIndexOf(')') + 2).split(' ')[19] ?? null;
	} catch {
		return null;
	}
}
