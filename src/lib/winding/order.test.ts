import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import type { DeviceLine } from '../turnline/types.ts';
import { Bench } from './bench-double.ts';
import { ackOf, takeLine } from './winder.ts';

/** The lines of a coil wound in stretches, with stands and turns back between. */
const strokes = fc.array(
	fc.record({
		turns: fc.integer({ min: 1, max: 60 }),
		back: fc.integer({ min: 0, max: 8 }),
		rpm: fc.integer({ min: 200, max: 900 })
	}),
	{ minLength: 1, maxLength: 5 }
);

function linesOf(plan: { turns: number; back: number; rpm: number }[]): { bench: Bench; lines: DeviceLine[] } {
	const bench = new Bench();
	bench.hi();
	bench.coil({ target: 100_000, lookEvery: 0 });
	bench.tap({ kind: 'start' });
	bench.wait(10);
	bench.tick();
	bench.down = true;
	for (const { turns, back, rpm } of plan) {
		bench.turn(turns, rpm);
		bench.stand();
		if (back > 0) {
			bench.turn(-back, 120);
			bench.stand();
		}
	}
	bench.down = false;
	return { bench, lines: bench.held };
}

/** Any order, some lines doubled, some lost; the one with the greatest totals always comes. */
const fate = fc.array(fc.record({ key: fc.nat(1_000_000), copies: fc.integer({ min: 0, max: 2 }) }), {
	minLength: 400,
	maxLength: 400
});

describe('whatever the order, loss or doubling of lines', () => {
	it('the count is that of the greatest totals', () => {
		fc.assert(
			fc.property(strokes, fate, (plan, fates) => {
				const { bench, lines } = linesOf(plan);
				const last = lines[lines.length - 1]!;
				const dealt = lines
					.flatMap((line, i) =>
						Array.from({ length: line === last ? 1 : fates[i % 400]!.copies }, (_, c) => ({
							line,
							key: fates[(i + c * 7) % 400]!.key
						}))
					)
					.sort((a, b) => a.key - b.key);
				for (const { line } of dealt) {
					bench.now += 5;
					bench.give(line);
				}
				expect(bench.run.turns).toBe(bench.f - bench.v);
				expect(bench.view.net).toBe(bench.f - bench.v);
			}),
			{ numRuns: 150 }
		);
	});

	it('no event beyond a gap is acknowledged, and each is taken in once', () => {
		fc.assert(
			fc.property(strokes, fate, (plan, fates) => {
				const { bench, lines } = linesOf(plan);
				const given = new Set<number>();
				const stored: number[] = [];
				lines.forEach((line, i) => {
					for (let copy = 0; copy < fates[i % 400]!.copies; copy += 1) {
						const step = bench.give(line);
						if (line.verb !== 'E') continue;
						given.add(line.e);
						if (step.outcome === 'stored') stored.push(line.e);
						const ack = ackOf(bench.state)!;
						for (let e = 1; e <= ack.e; e += 1) expect(given.has(e)).toBe(true);
					}
				});
				expect(new Set(stored).size).toBe(stored.length);
			}),
			{ numRuns: 100 }
		);
	});

	it('a line never changes the state it was given', () => {
		const { bench, lines } = linesOf([{ turns: 20, back: 2, rpm: 400 }]);
		for (const line of lines) {
			const before = JSON.stringify(bench.state);
			const step = takeLine(bench.state, bench.config, line, bench.now);
			expect(JSON.stringify(bench.state)).toBe(before);
			bench.state = step.state;
		}
	});
});
