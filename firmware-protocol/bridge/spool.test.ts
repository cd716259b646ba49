import { copyFileSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { open } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import fc from 'fast-check';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { formatLine, type DeviceLine } from '../../src/lib/turnline/index.ts';
import { readRecord, readRecords, writeRecord } from './record.ts';
import { Spool, type SpooledLine } from './spool.ts';

const b = '5C0E91A7';
const tick = (n: number): DeviceLine => ({ verb: 'T', b, n, e: 0, f: n, v: 0, r: 60, t: n * 100 });
const event = (n: number, e: number): DeviceLine => ({ verb: 'E', b, n, e, f: n, v: 0, t: n * 100, k: 'look' });
const heard = (line: DeviceLine) => ({ at: 1_796_133_600_000, text: formatLine(line), line });

let folder: string;
beforeEach(() => (folder = mkdtempSync(join(tmpdir(), 'turnstead-spool-'))));
afterEach(() => rmSync(folder, { recursive: true }));

const put = (spool: Spool, lines: DeviceLine[]) => spool.append(spool.number(lines.map(heard)));
async function all(spool: Spool): Promise<SpooledLine[]> {
	const found: SpooledLine[] = [];
	for (let seq = spool.freedSeq; ;) {
		const { lines, next } = await spool.read(seq, 100);
		found.push(...lines);
		if (lines.length === 0) return found;
		seq = next;
	}
}
const logs = () =>
	readdirSync(folder)
		.filter((name) => name.endsWith('.log'))
		.sort();

describe('a record', () => {
	it('is read as it was written', () => {
		const line = fc.record({
			kind: fc.constant('line' as const),
			seq: fc.nat(),
			at: fc.nat(),
			text: fc.stringMatching(/^[ -~]{0,160}$/)
		});
		const free = fc.record({ kind: fc.constant('free' as const), seq: fc.nat() });
		const boots = fc.record({ kind: fc.constant('boots' as const), seq: fc.nat(), boots: fc.constant([{ b, n: 1 }]) });
		fc.assert(
			fc.property(fc.oneof(line, free, boots), (record) => {
				expect(readRecord(writeRecord(record).slice(0, -1))).toEqual(record);
			})
		);
	});

	it('with any one character changed is none', () => {
		const text = writeRecord({ kind: 'line', seq: 7, at: 8, text: formatLine(tick(1)) }).slice(0, -1);
		for (let at = 0; at < text.length; at += 1) {
			const other = String.fromCharCode(text.charCodeAt(at) ^ 1);
			expect(readRecord(text.slice(0, at) + other + text.slice(at + 1))).toBeNull();
		}
	});
});

describe('a spool', () => {
	it('gives back what was put in, also after it was closed and opened', async () => {
		const first = await Spool.open({ folder });
		expect(await put(first, [tick(1), event(2, 1)])).toBe(true);
		expect(await put(first, [tick(3)])).toBe(true);
		await first.close();
		const again = await Spool.open({ folder });
		expect((await all(again)).map(({ seq, line }) => [seq, line])).toEqual([
			[1, tick(1)],
			[2, event(2, 1)],
			[3, tick(3)]
		]);
		expect(again.boots.of(b)).toMatchObject({ n: 3, e: 1 });
		expect(again.nextSeq).toBe(4);
		await again.close();
	});

	it('torn at any byte holds every record before the tear, and takes new ones', async () => {
		const first = await Spool.open({ folder });
		for (let n = 1; n <= 4; n += 1) await put(first, [n % 2 ? tick(n) : event(n, n / 2)]);
		await first.close();
		const [name] = logs();
		const whole = readFileSync(join(folder, name!));
		const ends = [...whole.keys()].filter((at) => whole[at] === 0x0a).map((at) => at + 1);
		const torn = join(folder, 'torn');
		for (let bytes = 0; bytes <= whole.length; bytes += 1) {
			rmSync(torn, { recursive: true, force: true });
			const spool0 = await Spool.open({ folder: torn });
			await spool0.close();
			writeFileSync(join(torn, name!), whole.subarray(0, bytes));
			const spool = await Spool.open({ folder: torn });
			// Two records stand at its head: the boots, and the mark of what is done.
			const held = Math.max(0, ends.filter((end) => end <= bytes).length - 2);
			expect((await all(spool)).map(({ seq }) => seq)).toEqual(Array.from({ length: held }, (_, i) => i + 1));
			expect(await put(spool, [tick(99)])).toBe(true);
			await spool.close();
			const after = await Spool.open({ folder: torn });
			const lines = await all(after);
			expect(lines).toHaveLength(held + 1);
			expect(lines.at(-1)?.line).toEqual(tick(99));
			expect(after.state().spoilt).toBe(0);
			await after.close();
		}
	});

	it('with any bytes overwritten by zeros loses those records alone', async () => {
		const first = await Spool.open({ folder });
		for (let n = 1; n <= 20; n += 1) await put(first, [tick(n)]);
		await first.close();
		const name = join(folder, logs()[0]!);
		const whole = readFileSync(name);
		const { records } = readRecords(whole);
		fc.assert(
			fc.property(fc.nat(whole.length - 1), fc.integer({ min: 1, max: 200 }), (from, length) => {
				const bytes = Buffer.from(whole);
				bytes.fill(0, from, Math.min(bytes.length, from + length));
				const touched = (i: number) => {
					const text = writeRecord(records[i]!);
					const start = records.slice(0, i).reduce((sum, record) => sum + writeRecord(record).length, 0);
					// The LF before it belongs to it: without it two records are one.
					return from < start + text.length && from + length > start - (i > 0 ? 1 : 0);
				};
				const expected = records.filter((_, i) => !touched(i));
				expect(readRecords(bytes).records).toEqual(expected);
			})
		);
	});

	it('removes whole files once everything in them is done with, and remembers it', async () => {
		const spool = await Spool.open({ folder, bytesMax: 64 * 1024 });
		for (let n = 1; n <= 300; n += 1) await put(spool, [event(n, n)]);
		expect(logs().length).toBeGreaterThan(3);
		await spool.free(290);
		expect(logs().length).toBeLessThanOrEqual(2);
		await spool.close();
		const again = await Spool.open({ folder, bytesMax: 64 * 1024 });
		expect(again.freedSeq).toBe(290);
		expect((await all(again)).map(({ seq }) => seq)).toEqual(Array.from({ length: 11 }, (_, i) => 290 + i));
		// What its boots were is known although their first lines are gone.
		expect(again.boots.of(b)).toMatchObject({ n: 300, e: 300, ahead: [] });
		await again.close();
	});

	it('gives up ticks when it is full, the oldest first, and never an event', async () => {
		const spool = await Spool.open({ folder, bytesMax: 64 * 1024 });
		const events: number[] = [];
		for (let n = 1; n <= 1_000; n += 1) {
			const isEvent = n % 20 === 0;
			if (isEvent) events.push(n);
			expect(await put(spool, [isEvent ? event(n, n / 20) : tick(n)])).toBe(true);
		}
		expect(spool.state().bytes).toBeLessThanOrEqual(64 * 1024);
		expect(spool.state().ticksDropped).toBeGreaterThan(200);
		const lines = await all(spool);
		expect(lines.filter(({ line }) => line.verb === 'E').map(({ line }) => 'n' in line && line.n)).toEqual(events);
		expect(lines.at(-1)?.line).toEqual(event(1_000, 50));
		await spool.close();
	});

	it('full of events refuses what is new, and takes it again once some are done with', async () => {
		const spool = await Spool.open({ folder, bytesMax: 32 * 1024 });
		let kept = 0;
		while (await put(spool, [event(kept + 1, kept + 1)])) kept += 1;
		expect(spool.state()).toMatchObject({ keeping: 'full' });
		expect(spool.boots.of(b)).toMatchObject({ e: kept });
		await spool.free(Math.floor(kept / 2));
		expect(await put(spool, [event(kept + 1, kept + 1)])).toBe(true);
		expect(spool.state()).toMatchObject({ keeping: 'yes' });
		const numbers = (await all(spool)).map(({ line }) => 'e' in line && line.e);
		expect(numbers.at(-1)).toBe(kept + 1);
		await spool.close();
	});

	it('keeps nothing of a batch that the disk took half of, and goes on when it takes again', async () => {
		let broken = false;
		const openFile: typeof open = async (...args) => {
			const handle = await open(...args);
			const write = handle.write.bind(handle) as (...all: unknown[]) => Promise<{ bytesWritten: number }>;
			Object.assign(handle, {
				write: async (bytes: Buffer, at: number, length: number, position: number) => {
					if (!broken) return write(bytes, at, length, position);
					await write(bytes, at, Math.floor(length / 2), position);
					throw Object.assign(new Error('no space left on device'), { code: 'ENOSPC' });
				}
			});
			return handle;
		};
		const spool = await Spool.open({ folder, openFile });
		expect(await put(spool, [event(1, 1)])).toBe(true);
		broken = true;
		expect(await put(spool, [event(2, 2)])).toBe(false);
		expect(spool.state()).toMatchObject({ keeping: 'full', reason: 'ENOSPC' });
		expect(spool.boots.of(b)).toMatchObject({ e: 1 });
		broken = false;
		expect(await put(spool, [event(2, 2), event(3, 3)])).toBe(true);
		await spool.close();
		const again = await Spool.open({ folder });
		expect((await all(again)).map(({ line }) => 'e' in line && line.e)).toEqual([1, 2, 3]);
		expect(again.state().spoilt).toBe(0);
		await again.close();
	});

	it('forgets a file that was being written anew when it was killed', async () => {
		const spool = await Spool.open({ folder });
		await put(spool, [tick(1)]);
		await spool.close();
		copyFileSync(join(folder, logs()[0]!), join(folder, `${logs()[0]!}.new`));
		const again = await Spool.open({ folder });
		expect(readdirSync(folder).some((name) => name.endsWith('.new'))).toBe(false);
		expect(await all(again)).toHaveLength(1);
		await again.close();
	});
});
