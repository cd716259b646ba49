import { describe, expect, it } from 'vitest';
import { joinedHenry, joinedOhm, together, type CoilSide } from './pickup.ts';

describe('coils joined', () => {
	it('in series add up, in parallel share, and alone are the first', () => {
		expect(joinedOhm([3000, 6000], 'series')).toBe(9000);
		expect(joinedOhm([3000, 6000], 'parallel')).toBeCloseTo(2000, 9);
		expect(joinedOhm([3000, 6000], 'single')).toBe(3000);
		expect(joinedOhm([3000], 'series')).toBe(3000);
	});

	it('have more inductance in series, and half of one in parallel, when their fields aid', () => {
		expect(joinedHenry([1, 1], 'series')).toBe(2);
		expect(joinedHenry([1, 1], 'series', 0.1)).toBeCloseTo(2.2, 12);
		expect(joinedHenry([1, 1], 'parallel', 0.1)).toBeCloseTo(0.55, 12);
		expect(joinedHenry([1, 2], 'parallel')).toBeCloseTo(2 / 3, 12);
		expect(joinedHenry([1, 1], 'single', 0.1)).toBe(1);
	});
});

describe('two coils together', () => {
	const side = (text: string): CoilSide => {
		const [pole, direction, hot] = text.split(' ') as [CoilSide['pole'], CoilSide['direction'], CoilSide['hot']];
		return { pole, direction, hot };
	};
	const first = side('north-up clockwise finish');

	// Everything the second coil can be; the first stays. A coil turned round in two of three ways is as it was.
	it.each([
		['north-up clockwise finish', false, true],
		['north-up clockwise start', true, false],
		['north-up counter-clockwise finish', true, false],
		['north-up counter-clockwise start', false, true],
		['south-up clockwise finish', false, false],
		['south-up clockwise start', true, true],
		['south-up counter-clockwise finish', true, true],
		['south-up counter-clockwise start', false, false]
	])('the second %s: hum-cancelling %s, in phase %s', (text, humCancelling, inPhase) => {
		expect(together(first, side(text))).toEqual({ humCancelling, inPhase });
		expect(together(side(text), first)).toEqual({ humCancelling, inPhase });
	});
});
