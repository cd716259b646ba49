import { afterEach, beforeEach, describe, expect, it, vi } from 'vitest';
import type { LineRow, WinderWrite } from '../db/recorder.ts';
import { GroupCommit } from './group-commit.ts';

const line = (n: number): LineRow => ({
	b: '5C0E91A7',
	n,
	e: 0,
	k: null,
	f: n,
	v: 0,
	r: 0,
	t: n,
	x: null,
	g: null,
	receivedAt: n
});
const cursor = (n: number) => ({ b: '5C0E91A7', n, e: 0, f: n, v: 0, t: n, firstAt: 0, lastAt: n });

let batches: { winder: string; lines: number[] }[][];
let refuse: ((writes: WinderWrite[]) => unknown) | null;
let commit: GroupCommit;
const told: string[] = [];

beforeEach(() => {
	vi.useFakeTimers();
	batches = [];
	refuse = null;
	told.length = 0;
	commit = new GroupCommit({
		async write(writes) {
			const error = refuse?.(writes);
			if (error) throw error;
			batches.push(writes.map((write) => ({ winder: write.winderId, lines: write.lines.map((row) => row.n) })));
		},
		onSaved: (_, winderId) => told.push(`saved ${winderId}`),
		onFailed: (_, winderId) => told.push(`failed ${winderId}`)
	});
});
afterEach(() => {
	commit.stop();
	vi.useRealTimers();
});

const add = (winderId: string, n: number, soon = false) => commit.add('shop', winderId, { lines: [line(n)] }, soon);

describe('a group commit', () => {
	it('gathers what comes within some milliseconds', async () => {
		void add('a', 1);
		void add('b', 2);
		const last = add('a', 3);
		await vi.advanceTimersByTimeAsync(39);
		expect(batches).toEqual([]);
		await vi.advanceTimersByTimeAsync(1);
		await last;
		expect(batches).toEqual([
			[
				{ winder: 'a', lines: [1, 3] },
				{ winder: 'b', lines: [2] }
			]
		]);
		expect(commit.pending('shop', 'a')).toBeNull();
	});

	it('goes at once for a person, and with two hundred lines', async () => {
		void add('a', 1, true);
		await vi.advanceTimersByTimeAsync(0);
		expect(batches).toHaveLength(1);
		for (let n = 2; n <= 201; n++) void add('a', n);
		await vi.advanceTimersByTimeAsync(0);
		expect(batches[1]?.[0]?.lines).toHaveLength(200);
	});

	it('keeps what could not be written, in order before what came since', async () => {
		refuse = () => new Error('connect ECONNREFUSED');
		const first = add('a', 1);
		await vi.advanceTimersByTimeAsync(40);
		expect(told).toEqual(['failed a']);
		expect(commit.saving('shop', 'a')).toBe(false);
		let done = false;
		void first.then(() => (done = true));
		const second = add('a', 2);
		await vi.advanceTimersByTimeAsync(100);
		expect(done).toBe(false);
		refuse = null;
		await vi.advanceTimersByTimeAsync(1000);
		await Promise.all([first, second]);
		expect(batches).toEqual([[{ winder: 'a', lines: [1, 2] }]]);
		expect(commit.saving('shop', 'a')).toBe(true);
	});

	it('tries again ever more seldom, yet at least every five seconds', async () => {
		let tries = 0;
		refuse = () => {
			tries += 1;
			return new Error('down');
		};
		void add('a', 1);
		await vi.advanceTimersByTimeAsync(60_000);
		expect(tries).toBeGreaterThan(12);
		expect(tries).toBeLessThan(22);
	});

	it('writes each winder alone when the rows of one are refused', async () => {
		refuse = (writes) =>
			writes.some((write) => write.winderId === 'bad') && Object.assign(new Error('no'), { code: '23514' });
		const good = add('good', 1);
		void add('bad', 2);
		await vi.advanceTimersByTimeAsync(40);
		await good;
		expect(told).toEqual(['saved good', 'failed bad']);
		expect(commit.saving('shop', 'good')).toBe(true);
		expect(commit.saving('shop', 'bad')).toBe(false);
	});

	it('of what is being written waits for the batch it is in', async () => {
		let finish = () => {};
		const slow = new GroupCommit({
			write: () => new Promise<void>((resolve) => (finish = resolve)),
			onSaved: () => {},
			onFailed: () => {}
		});
		const given = slow.add('shop', 'a', { lines: [line(1)] }, true);
		await vi.advanceTimersByTimeAsync(0);
		const pending = slow.pending('shop', 'a');
		expect(pending).not.toBeNull();
		expect(slow.unsavedRows('shop', 'a')).toBe(1);
		finish();
		await Promise.all([given, pending]);
		expect(slow.pending('shop', 'a')).toBeNull();
		slow.stop();
	});

	it('that hangs is no saving', async () => {
		const hung = new GroupCommit({ write: () => new Promise(() => {}), onSaved: () => {}, onFailed: () => {} });
		void hung.add('shop', 'a', { lines: [line(1)] }, true);
		await vi.advanceTimersByTimeAsync(1_000);
		expect(hung.saving('shop', 'a')).toBe(true);
		await vi.advanceTimersByTimeAsync(3_000);
		expect(hung.saving('shop', 'a')).toBe(false);
	});

	it('writes the newest cursor and snapshot of several', async () => {
		const seen: WinderWrite[] = [];
		const own = new GroupCommit({
			write: async (writes) => void seen.push(...writes),
			onSaved: () => {},
			onFailed: () => {}
		});
		void own.add('shop', 'a', { cursors: [cursor(1)], snapshot: { state: { n: 1 }, factNo: 1, at: 1 } });
		void own.add('shop', 'a', { cursors: [cursor(2)], snapshot: { state: { n: 2 }, factNo: 2, at: 2 } });
		await own.flush();
		expect(seen[0]).toMatchObject({ cursors: [{ n: 2 }], snapshot: { state: { n: 2 }, factNo: 2 } });
		own.stop();
	});
});
