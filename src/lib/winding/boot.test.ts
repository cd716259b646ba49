import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { addEvent, addLine, deviceTimeAt, hasLine, learnOffset, loseEvents, newBoot, unwrapT, wallAt } from './boot.ts';

describe('line numbers taken in', () => {
	it('are the same as a plain set, in any order, while gaps are few', () => {
		fc.assert(
			fc.property(fc.array(fc.integer({ min: 1, max: 90 }), { maxLength: 120 }), (numbers) => {
				const boot = newBoot('00000001', 0, 0, 1);
				const plain = new Set<number>();
				for (const n of numbers) {
					addLine(boot, n, 0);
					plain.add(n);
				}
				for (let n = 0; n <= 92; n += 1) expect(hasLine(boot, n)).toBe(plain.has(n));
			})
		);
	});

	it('are remembered in bounded space when every second one is lost', () => {
		const boot = newBoot('00000001', 0, 0, 1);
		for (let n = 1; n < 10_000; n += 2) addLine(boot, n, 0);
		expect(boot.seen.length).toBeLessThanOrEqual(96);
		expect(boot.recent.length).toBeLessThanOrEqual(64);
		expect(hasLine(boot, 9_999)).toBe(true);
		expect(hasLine(boot, 9_998)).toBe(false);
	});
});

describe('events', () => {
	it('are acknowledged up to the first gap', () => {
		const boot = newBoot('00000001', 0, 0, 1);
		for (const e of [2, 4, 1]) addEvent(boot, e);
		expect(boot.e).toBe(2);
		expect(loseEvents(boot)).toBe(1);
		expect(boot.e).toBe(4);
	});
});

describe('device time', () => {
	it('goes on past its wrap after 49.7 days', () => {
		const boot = newBoot('00000001', 0, 0, 1);
		boot.t = 2 ** 32 - 100;
		expect(unwrapT(boot, 50)).toBe(2 ** 32 + 50);
		expect(unwrapT(boot, 2 ** 32 - 300)).toBe(2 ** 32 - 300);
	});

	it('is placed on wall time by the smallest delay of the last minute', () => {
		const boot = newBoot('00000001', 1_000, 10_900, 1);
		learnOffset(boot, 1_000, 10_900, 1);
		learnOffset(boot, 2_000, 11_050, 1);
		learnOffset(boot, 3_000, 12_700, 1);
		expect(wallAt(boot, 3_000, 1)).toBe(12_050);
		expect(deviceTimeAt(boot, 12_050, 1)).toBe(3_000);
		learnOffset(boot, 80_000, 89_400, 1);
		expect(wallAt(boot, 80_000, 1)).toBe(89_400);
	});
});
