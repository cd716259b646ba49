import { describe, expect, it } from 'vitest';
import { figure, median, percentile } from './statistics.ts';

describe('percentile', () => {
	// Worked by hand: nearest rank is the sample at ⌈part · count⌉, counted from one.
	it('is the sample at the nearest rank', () => {
		const fiveRanked = [15, 20, 35, 40, 50];
		expect(percentile(fiveRanked, 0.3)).toBe(20);
		expect(percentile(fiveRanked, 0.4)).toBe(20);
		expect(percentile(fiveRanked, 0.5)).toBe(35);
		expect(percentile(fiveRanked, 1)).toBe(50);
	});

	it('of 0 is the smallest sample', () => {
		expect(percentile([3, 1, 2], 0)).toBe(1);
	});

	it('ranks numbers as numbers, whatever their order, and leaves them where they are', () => {
		const samples = [100, 9, 20];
		expect(percentile(samples, 0.99)).toBe(100);
		expect(percentile(samples, 0.01)).toBe(9);
		expect(samples).toEqual([100, 9, 20]);
	});

	it('p99 of a hundred samples leaves out the worst one and of fewer none', () => {
		const hundred = Array.from({ length: 100 }, (_, i) => i + 1);
		expect(percentile(hundred, 0.99)).toBe(99);
		expect(percentile(hundred.slice(0, 99), 0.99)).toBe(99);
	});

	it('of nothing is refused', () => {
		expect(() => percentile([], 0.5)).toThrow(RangeError);
	});
});

describe('median', () => {
	it('is the middle sample, or the mean of the two in the middle', () => {
		expect(median([9, 100, 1])).toBe(9);
		expect(median([4, 1, 3, 2])).toBe(2.5);
		expect(median([7])).toBe(7);
	});

	it('of nothing is refused', () => {
		expect(() => median([])).toThrow(RangeError);
	});
});

describe('figure', () => {
	it('keeps three digits that count, and thousands apart', () => {
		expect(figure(0.834)).toBe('0.83');
		expect(figure(12.34)).toBe('12.3');
		expect(figure(123.4)).toBe('123');
		expect(figure(1234567)).toBe('1,234,567');
		expect(figure(-2)).toBe('-2.00');
	});
});
