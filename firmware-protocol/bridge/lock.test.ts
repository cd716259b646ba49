import { mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { takeLock } from './lock.ts';

let folder: string;
beforeEach(() => (folder = mkdtempSync(join(tmpdir(), 'turnstead-lock-'))));
afterEach(() => rmSync(folder, { recursive: true }));

const startOf = (pid: number) => readFileSync(`/proc/${pid}/stat`, 'utf8').split(') ')[1]!.split(' ')[19]!;

describe('the lock of a spool', () => {
	it('is held by one, and free once that one has let go', async () => {
		const first = await takeLock(folder);
		expect(first.ok).toBe(true);
		expect(await takeLock(folder)).toEqual({ ok: false, holder: process.pid });
		if (first.ok) await first.held.release();
		expect(readdirSync(folder)).toEqual([]);
		expect((await takeLock(folder)).ok).toBe(true);
	});

	it('is not taken from a process that lives', async () => {
		writeFileSync(join(folder, 'lock'), `${process.ppid} ${startOf(process.ppid)}\n`);
		expect(await takeLock(folder)).toEqual({ ok: false, holder: process.ppid });
		expect(readFileSync(join(folder, 'lock'), 'utf8')).toContain(String(process.ppid));
	});

	it('is taken from one that was killed, also where its number is another process by now', async () => {
		for (const left of [`${process.ppid} 1\n`, '4194304 77\n', 'rubbish', '']) {
			writeFileSync(join(folder, 'lock'), left);
			const taken = await takeLock(folder);
			expect(taken.ok, left).toBe(true);
			if (taken.ok) await taken.held.release();
		}
		expect(readdirSync(folder)).toEqual([]);
	});
});
