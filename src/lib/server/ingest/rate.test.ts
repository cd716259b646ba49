import { describe, expect, it } from 'vitest';
import { burstLinesMax, linesPerSecondMax } from '../../turnline/index.ts';
import { LineBucket } from './rate.ts';

describe('the line bucket', () => {
	it('gives one burst, then so many a second', () => {
		const bucket = new LineBucket(0);
		expect(bucket.take(burstLinesMax, 0)).toBe(0);
		expect(bucket.take(1, 0)).toBe(1000 / linesPerSecondMax);
		expect(bucket.take(linesPerSecondMax, 1000)).toBe(0);
		expect(bucket.take(1, 1000)).toBeGreaterThan(0);
	});

	it('takes all of a batch or nothing', () => {
		const bucket = new LineBucket(0);
		bucket.take(590, 0);
		expect(bucket.take(30, 0)).toBe(1000);
		expect(bucket.take(10, 0)).toBe(0);
	});

	it('never holds more than one burst', () => {
		const bucket = new LineBucket(0);
		expect(bucket.take(burstLinesMax + 1, 3_600_000)).toBeGreaterThan(0);
	});

	it('lets an hour of spool pass in minutes beside live lines', () => {
		const bucket = new LineBucket(0);
		let spool = 3600;
		let s = 0;
		for (; spool > 0; s++) {
			// Live lines go first; what room is left carries the spool.
			expect(bucket.take(10, s * 1000)).toBe(0);
			while (spool > 0 && bucket.take(10, s * 1000) === 0) spool -= 10;
		}
		expect(s).toBeLessThan(6 * 60);
	});
});
