import { describe, expect, it } from 'vitest';
import { LinkRecord } from './link-record.ts';

describe('the record of a link', () => {
	it('shows the last lines and counts what was refused for each reason', () => {
		const record = new LinkRecord();
		for (let i = 0; i < 100; i++) record.line(i, `T n=${i}`, 'stored', 'http');
		record.line(100, 'T x', 'checksum', 'ws');
		record.line(101, 'hello', 'form', 'ws');
		const log = record.log(1);
		expect(log.lines).toHaveLength(20);
		expect(log.lines.at(-1)).toEqual({ at: 101, text: 'hello', verdict: 'form' });
		expect(log.refused).toEqual({ checksum: 1, form: 1 });
		expect(log.carriers).toEqual({ http: { lastAt: 99, lines: 100 }, ws: { lastAt: 101, lines: 2 } });
	});

	it('notices more than one refused line in a hundred, over ten seconds', () => {
		const record = new LinkRecord();
		for (let i = 0; i < 99; i++) record.line(1000 + i, 'T', 'stored', 'ws');
		record.line(1100, 'T', 'checksum', 'ws');
		expect(record.manyErrors(1100)).toBe(false);
		record.line(1101, 'T', 'checksum', 'ws');
		expect(record.manyErrors(1101)).toBe(true);
		expect(record.manyErrors(20_000)).toBe(false);
	});

	it('shows the start of a line that is far too long', () => {
		const record = new LinkRecord();
		record.line(0, 'x'.repeat(10_000), 'too-long', 'http');
		expect(record.log(0).lines[0]?.text).toHaveLength(200);
	});
});
