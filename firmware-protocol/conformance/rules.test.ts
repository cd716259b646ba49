import { describe, expect, it } from 'vitest';
import { withChecksum } from '../../src/lib/turnline/index.ts';
import { answerMsMax, judge, rules, syncMsMax, type Level } from './rules.ts';
import { entryText, type Entry, type Session } from './session.ts';

const b = '5C0E91A7';
const hi = (n: number, e: number, f: number) => `HI p=1 dev=w-01 b=${b} n=${n} e=${e} f=${f} v=0 t=4 rep=100`;
const tick = (n: number, e: number, f: number, t: number) => `T b=${b} n=${n} e=${e} f=${f} v=0 r=0 t=${t}`;
const event = (n: number, e: number, f: number, t: number) => `E b=${b} n=${n} e=${e} f=${f} v=0 t=${t} k=stop`;

type Row = [atMs: number, from: Entry['from'], text: string, more?: Partial<Entry>];
const session = (rows: Row[], endedMs = 60_000): Session => ({
	entries: rows.map(([atMs, from, text, more], at) => ({
		no: at + 1,
		atMs,
		from,
		text: (from === 'winder' || from === 'host') && !more ? withChecksum(text) : text,
		...more
	})),
	endedMs
});
const verdict = (id: string, recorded: Session, level: Level = 'full') =>
	judge(recorded, level).find((one) => one.id === id)!;

describe('the rules', () => {
	it('have each an id and a sentence of their own', () => {
		expect(new Set(rules.map(({ id }) => id)).size).toBe(rules.length);
		expect(new Set(rules.map(({ says }) => says)).size).toBe(rules.length);
	});

	it('judge no empty session: what was not seen is neither kept nor broken', () => {
		const results = judge(session([]), 'full').map(({ id, result }) => [id, result]);
		expect(results.filter(([, result]) => result !== 'not-shown')).toEqual([['speaks-standing', 'fail']]);
	});

	it('a question at the very end is not held against the winder', () => {
		const rows: Row[] = [
			[0, 'link', 'up'],
			[0, 'winder', hi(0, 0, 0)],
			[100, 'host', '?']
		];
		expect(verdict('answers-ask', session(rows, 100 + answerMsMax - 1)).result).toBe('not-shown');
		expect(verdict('answers-ask', session(rows, 100 + answerMsMax))).toMatchObject({ result: 'fail', lines: [3] });
	});

	it('one answer is not taken for two', () => {
		const rows: Row[] = [
			[0, 'winder', hi(0, 0, 0)],
			[10, 'host', '?'],
			[20, 'host', '?'],
			[30, 'winder', hi(0, 0, 0)]
		];
		expect(verdict('answers-ask', session(rows))).toMatchObject({ result: 'fail', lines: [3] });
		expect(verdict('answers-ask', session([...rows, [40, 'winder', hi(0, 0, 0)]]))).toMatchObject({
			result: 'pass',
			lines: [2, 4, 3, 5]
		});
	});

	it('a winder that ran before its cable was opened may begin with lines sent again', () => {
		const rows: Row[] = [
			[0, 'cable', 'opened'],
			[5, 'winder', event(29, 2, 12, 3026)],
			[10, 'winder', tick(32, 2, 12, 6030)],
			[20, 'winder', hi(32, 2, 12)],
			[1010, 'winder', tick(33, 2, 12, 7030)],
			[2010, 'winder', tick(34, 2, 12, 8030)]
		];
		expect(verdict('line-numbers', session(rows)).result).toBe('pass');
		expect(verdict('event-numbers', session(rows)).result).toBe('pass');
		expect(verdict('birth-first', session(rows)).result).toBe('not-asked');
	});

	it('at a link that the winder knows to be new the same lines are wrong', () => {
		const rows: Row[] = [
			[0, 'link', 'up'],
			[5, 'winder', tick(1, 0, 0, 1000)],
			[20, 'winder', hi(1, 0, 0)]
		];
		expect(verdict('birth-first', session(rows))).toMatchObject({ result: 'fail', lines: [2] });
	});

	it('a new link in the middle begins with HI, and lines kept meanwhile may be thinned', () => {
		const rows: Row[] = [
			[0, 'link', 'up'],
			[0, 'winder', hi(0, 0, 0)],
			[1000, 'winder', tick(1, 0, 0, 1000)],
			[5000, 'link', 'up'],
			[5010, 'winder', hi(9, 0, 0)],
			[5020, 'winder', tick(9, 0, 0, 5000)],
			[5030, 'winder', tick(7, 0, 0, 4000)],
			[6000, 'winder', tick(10, 0, 0, 6000)]
		];
		expect(verdict('line-numbers', session(rows)).result).toBe('pass');
		expect(verdict('birth-first', session(rows))).toMatchObject({ result: 'pass', lines: [2, 5] });
		rows.splice(4, 1);
		expect(verdict('birth-first', session(rows))).toMatchObject({ result: 'fail', lines: [5] });
	});

	it('a line that was spoilt on the way had a number, and no other rule is broken by its absence', () => {
		const rows: Row[] = [
			[0, 'link', 'up'],
			[0, 'winder', hi(0, 0, 0)],
			[1000, 'winder', tick(1, 0, 0, 1000)],
			[2000, 'winder', `${tick(2, 0, 0, 2000)} ~0000`, { no: 4 }],
			[3000, 'winder', tick(3, 0, 0, 3000)],
			[3100, 'winder', '', { dropped: 'not-ascii' }],
			[4000, 'winder', tick(5, 0, 0, 4000)]
		];
		expect(
			judge(session(rows), 'full').filter(({ result, id }) => result === 'fail' && id !== 'speaks-standing')
		).toMatchObject([
			{ id: 'checksum', lines: [4] },
			{ id: 'form', lines: [6] }
		]);
		rows.splice(3, 1);
		expect(verdict('line-numbers', session(rows))).toMatchObject({ result: 'fail', why: 'n=3 came after n=1' });
	});

	it('SYNC may be answered NO why=gone where an event was acknowledged, and not where it was not', () => {
		const acked = (n: number, e: number): Row[] => [
			[0, 'link', 'up'],
			[0, 'winder', hi(0, 0, 0)],
			[10, 'winder', event(1, 1, 0, 10)],
			[20, 'host', `ACK b=${b} n=${n} e=${e}`],
			[30, 'host', `SYNC b=${b} e=0`],
			[40, 'winder', `NO b=${b} why=gone`]
		];
		expect(verdict('answers-sync', session(acked(1, 1))).result).toBe('pass');
		expect(verdict('own-ack-only', session(acked(1, 1))).result).toBe('not-shown');
		expect(verdict('answers-sync', session(acked(1, 0))).result).toBe('pass');
		expect(verdict('own-ack-only', session(acked(1, 0)))).toMatchObject({ result: 'fail', lines: [5, 6] });
		const silent = acked(1, 0).slice(0, -1);
		expect(verdict('answers-sync', session(silent, 30 + syncMsMax - 1)).result).toBe('not-shown');
		expect(verdict('answers-sync', session(silent, 30 + syncMsMax)).result).toBe('fail');
	});

	it('totals that fall to nothing are a zeroing, others a fall; a HI ahead of its lines is neither', () => {
		const rows = (f: number): Row[] => [
			[0, 'winder', hi(0, 0, 0)],
			[1000, 'winder', tick(1, 0, 5, 1000)],
			[1500, 'winder', hi(1, 0, 7)],
			[1600, 'winder', tick(2, 0, 6, 1600)],
			[2000, 'winder', tick(3, 0, f, 2000)]
		];
		const failed = (f: number) =>
			judge(session(rows(f)), 'basic').filter(({ result, id }) => result === 'fail' && id !== 'speaks-standing');
		expect(failed(8)).toEqual([]);
		expect(failed(5)).toMatchObject([{ id: 'totals-grow', lines: [4, 5], why: 'f=6 v=0 became f=5 v=0' }]);
		expect(failed(0)).toMatchObject([{ id: 'no-zeroing', lines: [4, 5] }]);
	});

	it('judge the same record alike however often, and change nothing in it', () => {
		const recorded = session([
			[0, 'link', 'up'],
			[0, 'winder', hi(0, 0, 0)],
			[1000, 'winder', tick(1, 0, 0, 1000)]
		]);
		const before = structuredClone(recorded);
		expect(judge(recorded, 'full')).toEqual(judge(recorded, 'full'));
		expect(recorded).toEqual(before);
	});
});

describe('a line of the record', () => {
	it('is shown with its number, its time, its direction, and bytes that nobody can read as a dot', () => {
		expect(entryText({ no: 7, atMs: 1234.5, from: 'host', text: 'SET \u00ff' })).toBe('   7    1.234 s ← SET ·');
		expect(entryText({ no: 8, atMs: 0, from: 'winder', text: '', dropped: 'too-long' })).toBe(
			'   8    0.000 s → (a line too long)'
		);
	});
});
