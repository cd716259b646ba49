import { describe, expect, it } from 'vitest';
import { beatCame, madeBeforeMs, type Arrivals } from './arrival.ts';

/** Feeds [sent at, received at] pairs and gives the delay after each. */
function delays(pairs: [number, number][]): number[] {
	let now: Arrivals | null = null;
	return pairs.map(([sentAt, receivedAtMs]) => (now = beatCame(now, sentAt, receivedAtMs)).delayMs);
}

describe('arrival of beats', () => {
	it('a steady stream has no delay, whatever the clocks say', () => {
		expect(
			delays([
				[900_000, 50],
				[902_000, 2_050],
				[904_000, 4_050]
			])
		).toEqual([0, 0, 0]);
	});

	it('a beat held up on the way is late by as much', () => {
		expect(
			delays([
				[900_000, 50],
				[902_000, 4_150],
				[904_000, 4_160]
			])
		).toEqual([0, 2_100, 110]);
	});

	it('a server clock set back an hour is no delay', () => {
		expect(
			delays([
				[7_200_000, 50],
				[3_602_000, 2_050],
				[3_604_000, 4_050]
			])
		).toEqual([0, 0, 0]);
	});

	it('a server clock set forward an hour is no delay', () => {
		expect(
			delays([
				[3_600_000, 50],
				[7_202_000, 2_050],
				[7_204_000, 4_050]
			])
		).toEqual([0, 0, 0]);
	});

	it('slow drift of the clocks is forgotten', () => {
		// 1 ms a second for ten minutes: never taken for more than two windows of it.
		const pairs: [number, number][] = Array.from({ length: 601 }, (_, s) => [s * 1_000, s * 1_001]);
		expect(Math.max(...delays(pairs))).toBeLessThanOrEqual(121);
	});
});

describe('age of a state that comes', () => {
	it('one made ten minutes ago is ten minutes old, though it comes at once', () => {
		const arrivals = beatCame(null, 900_000, 50);
		expect(madeBeforeMs(arrivals, 300_000, 60)).toBe(600_010);
	});

	it('one made just now is not older for a clock that is fast', () => {
		const arrivals = beatCame(null, 900_000, 50);
		expect(madeBeforeMs(arrivals, 905_000, 5_050)).toBe(0);
		expect(madeBeforeMs(arrivals, 905_100, 5_050)).toBe(0);
	});

	it('before any beat nothing is known', () => {
		expect(madeBeforeMs(null, 300_000, 60)).toBe(0);
	});
});
