import { afterEach, beforeEach, describe, expect, it, vi } from 'vitest';
import type { LineRow, NumberedFact, RunChange, WinderWrite } from '../db/recorder.ts';
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
		onFailed: (_, winderId) => told.push(`failed ${winderId}`),
		onDropped: (_, winderId, dropped) => told.push(`dropped ${winderId} ${JSON.stringify(dropped)}`)
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

	describe('with a row that is refused for good', () => {
		const fact = (no: number): NumberedFact => ({
			no,
			kind: 'went-on',
			at: 0,
			runId: null,
			turns: null,
			detail: {},
			memberId: null,
			tapId: null
		});
		const closed = { kind: 'closed', runId: 'r', coilId: 'c', state: 'kept' } as RunChange;
		const back: RunChange = { kind: 'put-back', runId: 'q', coilId: 'c' };
		const snapshot = { state: { v: 1 }, factNo: 3, at: 0 };
		const no = Object.assign(new Error('no'), { code: '22P05' });
		let written: WinderWrite[];
		beforeEach(() => (written = []));

		/** Refuses whatever `bad` finds in a write; the rest is noted. */
		const refusing = (bad: (write: WinderWrite) => boolean) => {
			refuse = (writes) => {
				if (writes.some(bad)) return no;
				written.push(...structuredClone(writes));
				return null;
			};
		};
		const all = () => ({
			lines: written.flatMap((write) => write.lines),
			cursors: written.flatMap((write) => write.cursors),
			facts: written.flatMap((write) => write.facts),
			changes: written.flatMap((write) => write.changes)
		});

		it('saves all else after some tries, and says what it gave up', async () => {
			refusing(
				(write) => write.facts.some((one) => one.no === 2) || write.changes.some((one) => one.kind === 'put-back')
			);
			const more = { lines: [line(1)], cursors: [cursor(1)], facts: [fact(1), fact(2), fact(3)] };
			let done = false;
			void commit.add('shop', 'a', { ...more, changes: [back, closed], snapshot }).then(() => (done = true));
			await vi.advanceTimersByTimeAsync(3_000);
			expect(written).toEqual([]);
			expect(done).toBe(false);
			await vi.advanceTimersByTimeAsync(10_000);
			expect(done).toBe(true);
			expect(all().lines).toHaveLength(1);
			expect(all().cursors).toHaveLength(1);
			expect(all().facts.map((one) => one.no)).toEqual([1, 3]);
			expect(all().changes).toEqual([closed]);
			expect(written.at(-1)?.snapshot).toEqual(snapshot);
			expect(told.filter((text) => text.startsWith('dropped'))).toEqual([
				`dropped a ${JSON.stringify({ fact: fact(2) })}`,
				`dropped a ${JSON.stringify({ change: back })}`
			]);
			expect(commit.saving('shop', 'a')).toBe(true);
			expect(commit.unsaved()).toBeNull();
		});

		it('never gives up lines or the end of a run, and lets later lines go to disk meanwhile', async () => {
			refusing((write) => write.changes.some((one) => one.kind === 'closed'));
			void commit.add('shop', 'a', { lines: [line(1)], facts: [fact(1)], changes: [closed, back], snapshot });
			await vi.advanceTimersByTimeAsync(15_000);
			expect(all().lines).toHaveLength(1);
			expect(commit.holdsBack('shop', 'a')).toBe(true);
			expect(commit.saving('shop', 'a')).toBe(false);
			let later = false;
			void commit.add('shop', 'a', { lines: [line(2)] }).then(() => (later = true));
			await vi.advanceTimersByTimeAsync(6_000);
			expect(later).toBe(true);
			expect(all().lines.map((row) => row.n)).toEqual([1, 2]);
			expect(all().changes).toEqual([]);
			expect(written.every((write) => write.snapshot === null)).toBe(true);
			expect(told.some((text) => text.startsWith('dropped'))).toBe(false);

			refusing(() => false);
			await vi.advanceTimersByTimeAsync(6_000);
			expect(all().changes).toEqual([closed, back]);
			expect(written.at(-1)?.snapshot).toEqual(snapshot);
			expect(commit.holdsBack('shop', 'a')).toBe(false);
			expect(commit.saving('shop', 'a')).toBe(true);
		});

		it('keeps lines that are refused themselves', async () => {
			refusing((write) => write.lines.length > 0);
			void add('a', 1);
			await vi.advanceTimersByTimeAsync(60_000);
			expect(written).toEqual([]);
			expect(commit.unsaved()).toEqual({ lines: 1 });
		});

		it('goes on where it was when the database goes away meanwhile', async () => {
			let away = true;
			refuse = (writes) => {
				if (writes.some((write) => write.facts.some((one) => one.no === 1))) return no;
				if (away && writes.some((write) => write.facts.length > 0)) return new Error('connect ECONNREFUSED');
				written.push(...structuredClone(writes));
				return null;
			};
			void commit.add('shop', 'a', { lines: [line(1)], facts: [fact(1), fact(2)] });
			await vi.advanceTimersByTimeAsync(30_000);
			away = false;
			await vi.advanceTimersByTimeAsync(6_000);
			expect(all().lines).toHaveLength(1);
			expect(all().facts.map((one) => one.no)).toEqual([2]);
			expect(commit.unsaved()).toBeNull();
		});
	});

	it('of what is being written waits for the batch it is in', async () => {
		let finish = () => {};
		const slow = new GroupCommit({
			write: () => new Promise<void>((resolve) => (finish = resolve)),
			onSaved: () => {},
			onFailed: () => {},
			onDropped: () => {}
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
		const hung = new GroupCommit({
			write: () => new Promise(() => {}),
			onSaved: () => {},
			onFailed: () => {},
			onDropped: () => {}
		});
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
			onFailed: () => {},
			onDropped: () => {}
		});
		void own.add('shop', 'a', { cursors: [cursor(1)], snapshot: { state: { n: 1 }, factNo: 1, at: 1 } });
		void own.add('shop', 'a', { cursors: [cursor(2)], snapshot: { state: { n: 2 }, factNo: 2, at: 2 } });
		await own.flush();
		expect(seen[0]).toMatchObject({ cursors: [{ n: 2 }], snapshot: { state: { n: 2 }, factNo: 2 } });
		own.stop();
	});
});
