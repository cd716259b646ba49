import { describe, expect, it } from 'vitest';
import { together } from '../coil/pickup.ts';
import { specTogether } from './model.ts';
import { startingSpec } from './start.ts';
import { mendWords, togetherTable } from './together.ts';

const spec = () => startingSpec('two-coils', 'Evening bridge');

describe('the truth table of two coils', () => {
	it('has each of the eight ways once', () => {
		const ways = togetherTable(spec()).map((row) => `${row.samePole} ${row.sameDirection} ${row.sameHot}`);
		expect(new Set(ways).size).toBe(8);
	});

	it('marks the one row of the spec, which says what the computation says', () => {
		for (const pole of ['north-up', 'south-up'] as const)
			for (const direction of ['clockwise', 'counter-clockwise'] as const)
				for (const hot of ['start', 'finish'] as const)
					for (const first of ['north-up', 'south-up'] as const) {
						const content = spec();
						Object.assign(content.coils[0]!, { pole: first });
						Object.assign(content.coils[1]!, { pole, direction, hot });
						const own = togetherTable(content).filter((row) => row.own);
						expect(own).toHaveLength(1);
						expect(own[0]).toMatchObject(specTogether(content)!);
					}
	});

	it('marks none for one coil alone', () => {
		expect(togetherTable(startingSpec('one-coil', 'Evening neck')).some((row) => row.own)).toBe(false);
	});
});

describe('what mends an unwished way', () => {
	const start = { pole: 'south-up', direction: 'clockwise', hot: 'start' } as const;
	const swapped = (side: typeof start | object) => ({ ...start, ...side });

	it('is nothing where hum cancels in phase', () => {
		expect(mendWords({ humCancelling: true, inPhase: true })).toBeNull();
	});

	it('is to swap the leads of one coil where both are wrong', () => {
		const wrong = swapped({ pole: 'north-up' });
		expect(together(start, wrong)).toEqual({ humCancelling: false, inPhase: false });
		expect(mendWords(together(start, wrong))).toMatch(/Swap start and finish of one coil: that mends both/);
		expect(together(start, { ...wrong, hot: 'finish' })).toEqual({ humCancelling: true, inPhase: true });
	});

	it('is to turn a magnet where only the phase is wrong', () => {
		const wrong = swapped({ hot: 'finish' });
		expect(together(start, wrong)).toEqual({ humCancelling: true, inPhase: false });
		expect(mendWords(together(start, wrong))).toMatch(/Turn the magnet of one coil over/);
		expect(together(start, { ...wrong, pole: 'north-up' })).toEqual({ humCancelling: true, inPhase: true });
	});

	it('is both where only the hum is wrong', () => {
		expect(together(start, start)).toEqual({ humCancelling: false, inPhase: true });
		expect(mendWords(together(start, start))).toMatch(/Swap start and finish .* and turn its magnet over/);
		expect(together(start, { ...start, hot: 'finish', pole: 'north-up' })).toEqual({
			humCancelling: true,
			inPhase: true
		});
	});
});
