import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { expectedBand, judge } from './band.ts';
import { coverage, difference, rangeFor, readingTo20C, type MeterRange } from './measurement.ts';
import type { Result } from './refuse.ts';

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}

const meter: MeterRange = { upToOhm: 20_000, percent: 0.5, counts: 2, ohmPerCount: 10 };

describe('a reading at 20 °C', () => {
	// JCGM 100 (GUM); python3-uncertainties.
	it('of 7520 Ω at 27 ± 2 °C, meter ±(0.5 % + 2 counts of 10 Ω), is 7318.66 ± 91.48 Ω', () => {
		const reading = value(readingTo20C(7520, 27, 2, meter));
		expect(Math.abs(reading.ohm - 7318.6636)).toBeLessThan(1e-4);
		expect(Math.abs(reading.uncertaintyOhm - 45.741)).toBeLessThan(5e-4);
		expect(Math.abs(coverage * reading.uncertaintyOhm - 91.482)).toBeLessThan(1e-3);
		expect(Math.hypot(reading.meterOhm, reading.temperatureOhm)).toBeCloseTo(reading.uncertaintyOhm, 9);
	});

	it('outside sense is refused by its field', () => {
		expect(readingTo20C(NaN, 20, 1, meter)).toMatchObject({ field: 'ohm', got: null });
		expect(readingTo20C(7500, 20, 1, { ...meter, counts: -1 })).toMatchObject({ field: 'meter.counts' });
		expect(readingTo20C(7500, 20, 1, { ...meter, ohmPerCount: Infinity })).toMatchObject({
			field: 'meter.ohmPerCount'
		});
	});
});

it('the range of a reading is the smallest that holds it', () => {
	const ranges = [
		{ ...meter, upToOhm: 200_000 },
		{ ...meter, upToOhm: 2000 },
		{ ...meter, upToOhm: 20_000 }
	];
	expect(rangeFor(ranges, 7500)!.upToOhm).toBe(20_000);
	expect(rangeFor(ranges, 2000)!.upToOhm).toBe(2000);
	expect(rangeFor(ranges, 1e6)).toBeNull();
});

describe('the difference of two coils read with one meter', () => {
	const a = { ohm: 3800, temperatureC: 22 };
	const b = { ohm: 3700, temperatureC: 22 };

	it('is surer than their readings, because what the meter is off is off for both', () => {
		const told = value(difference(a, b, 0.2, meter));
		const each = [a, b].map((coil) => value(readingTo20C(coil.ohm, coil.temperatureC, 0.2, meter)));
		expect(told.ohm).toBeCloseTo(each[0]!.ohm - each[1]!.ohm, 9);
		expect(told.uncertaintyOhm).toBeLessThan(Math.hypot(...each.map((reading) => reading.uncertaintyOhm)));
		// 0.5 % of the difference, and two counts of each.
		const factor = 1 + 0.00393 * 2;
		const counts = (20 / Math.sqrt(3) / factor) * Math.SQRT2;
		const temperatures = Math.hypot(...each.map((reading) => reading.temperatureOhm));
		expect(told.uncertaintyOhm).toBeCloseTo(Math.hypot((0.005 * told.ohm) / Math.sqrt(3), counts, temperatures), 9);
	});

	it('changes its sign with their order and nothing else', () => {
		fc.assert(
			fc.property(fc.integer({ min: 1000, max: 9000 }), fc.integer({ min: 1000, max: 9000 }), (x, y) => {
				const there = value(difference({ ohm: x, temperatureC: 19 }, { ohm: y, temperatureC: 25 }, 1, meter));
				const back = value(difference({ ohm: y, temperatureC: 25 }, { ohm: x, temperatureC: 19 }, 1, meter));
				expect(there.ohm).toBe(-back.ohm);
				expect(there.uncertaintyOhm).toBeCloseTo(back.uncertaintyOhm, 9);
			})
		);
	});
});

describe('a coil against what was expected', () => {
	const expected = { ohm: 7500, uncertaintyOhm: 60 };

	it('is expected between twice the standard uncertainty either way', () => {
		expect(value(expectedBand(expected))).toEqual({ fromOhm: 7380, toOhm: 7620 });
		expect(value(expectedBand({ ohm: 10, uncertaintyOhm: 9 })).fromOhm).toBe(0);
	});

	it.each([
		[7500, 'within'],
		[7620, 'within'],
		[7700, 'above'],
		[7300, 'below'],
		[100, 'short'],
		[0, 'short'],
		[5e6, 'open']
	])('with a reading of %f Ω is %s', (ohm, agreement) => {
		expect(value(judge({ ohm, uncertaintyOhm: 20 }, expected)).agreement).toBe(agreement);
	});

	it('beyond every range of the meter is open', () => {
		expect(value(judge(null, expected))).toEqual({ agreement: 'open', deviation: null, ofBand: null });
	});

	it('agrees more easily the less sure the reading is', () => {
		const at = (uncertaintyOhm: number) => value(judge({ ohm: 7650, uncertaintyOhm }, expected));
		expect(at(0).agreement).toBe('above');
		expect(at(60).agreement).toBe('within');
		expect(at(0).ofBand!).toBeGreaterThan(at(60).ofBand!);
		expect(at(0).deviation).toBeCloseTo(0.02, 12);
	});

	it('without any uncertainty agrees only when the same', () => {
		const exact = { ohm: 7500, uncertaintyOhm: 0 };
		expect(value(judge({ ohm: 7500, uncertaintyOhm: 0 }, exact)).agreement).toBe('within');
		expect(value(judge({ ohm: 7501, uncertaintyOhm: 0 }, exact)).agreement).toBe('above');
	});
});
