import { describe, expect, it } from 'vitest';
import { bootIdFrom, randomFrom, wholeBetween } from './random.ts';

const draws = (seed: number, name: string) => {
	const random = randomFrom(seed, name);
	return Array.from({ length: 1000 }, random);
};

describe('numbers from a seed', () => {
	it('are the same for the same seed and name, and others for another', () => {
		expect(draws(7, 'spindle')).toEqual(draws(7, 'spindle'));
		expect(draws(7, 'spindle')).not.toEqual(draws(8, 'spindle'));
		expect(draws(7, 'spindle')).not.toEqual(draws(7, 'maker'));
	});

	it('lie in [0, 1) and spread over it', () => {
		const numbers = draws(1, 'spread');
		expect(Math.min(...numbers)).toBeGreaterThanOrEqual(0);
		expect(Math.max(...numbers)).toBeLessThan(1);
		const mean = numbers.reduce((sum, number) => sum + number, 0) / numbers.length;
		expect(Math.abs(mean - 0.5)).toBeLessThan(0.05);
	});

	it('reach both bounds of a whole range', () => {
		const random = randomFrom(3, 'whole');
		const seen = new Set(Array.from({ length: 200 }, () => wholeBetween(random, 2, 6)));
		expect([...seen].sort()).toEqual([2, 3, 4, 5, 6]);
	});

	it('make boot ids of eight hex digits', () => {
		const random = randomFrom(5, 'boot');
		for (let id = 0; id < 200; id++) expect(bootIdFrom(random)).toMatch(/^[0-9A-F]{8}$/);
	});
});
