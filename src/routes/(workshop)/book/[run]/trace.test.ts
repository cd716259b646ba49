import { describe, expect, it } from 'vitest';
import { tracePoints } from './trace.ts';

describe('the points of a trace', () => {
	it('are all of them when they fit, in seconds', () => {
		expect(tracePoints({ atMs: [0, 1040, 2000], turns: [0, 1, 9], rpm: [0, 60, -480] })).toEqual([
			{ s: 0, turns: 0, rpm: 0 },
			{ s: 1, turns: 1, rpm: 60 },
			{ s: 2, turns: 9, rpm: 480 }
		]);
	});

	it('are thinned to what fits and keep the first, the last and the fastest', () => {
		const length = 10_000;
		const trace = {
			atMs: Array.from({ length }, (_, i) => i * 100),
			turns: Array.from({ length }, (_, i) => i),
			rpm: Array.from({ length }, (_, i) => (i === 4321 ? 999 : 400))
		};
		const points = tracePoints(trace, 100);
		expect(points.length).toBeLessThanOrEqual(100);
		expect(points[0]?.turns).toBe(0);
		expect(points.at(-1)?.turns).toBe(length - 1);
		expect(points.some((point) => point.rpm === 999)).toBe(true);
		expect(points.map((point) => point.turns)).toEqual([...points.map((p) => p.turns)].sort((a, b) => a - b));
	});

	it('of nothing are none', () => {
		expect(tracePoints({ atMs: [], turns: [], rpm: [] })).toEqual([]);
	});
});
