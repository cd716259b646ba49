import { ok, outside, sound, type Result } from './refuse.ts';
import { copperAlphaPerK, to20C } from './wire.ts';

/** Readings of resistance and what they are worth (JCGM 100, the GUM). Ohms, °C. */

/** Accuracy as meters state it, ±(percent of reading + counts), on one range. */
export interface MeterRange {
	/** Greatest reading of the range. */
	upToOhm: number;
	percent: number;
	counts: number;
	/** One count of the last digit. */
	ohmPerCount: number;
}

/** The range a reading falls in: the smallest that holds it; null beyond all. */
export const rangeFor = (ranges: readonly MeterRange[], ohm: number): MeterRange | null =>
	[...ranges].sort((a, b) => a.upToOhm - b.upToOhm).find((range) => ohm <= range.upToOhm) ?? null;

/** Half-width of the meter's interval at a reading. */
export const meterHalfWidthOhm = (range: MeterRange, ohm: number): number =>
	sound((range.percent / 100) * ohm + range.counts * range.ohmPerCount);

/** A limit ±a with nothing known inside it is a rectangular distribution: u = a/√3 (JCGM 100, 4.3.7). */
export const rectangular = (halfWidth: number): number => sound(halfWidth / Math.sqrt(3));

/** Coverage factor for "19 in 20" (JCGM 100, 6.3.3). */
export const coverage = 2;

export interface At20C {
	ohm: number;
	/** Combined standard uncertainty; the interval shown is `coverage` times it. */
	uncertaintyOhm: number;
	/** Parts of it: the meter's, most of it common to all readings with it… */
	meterOhm: number;
	/** …and the temperature's. */
	temperatureOhm: number;
}

/**
 * A reading brought to 20 °C.
 *
 * @param temperatureHalfWidthC how far the coil's temperature may be off either way
 */
export function readingTo20C(
	ohm: number,
	temperatureC: number,
	temperatureHalfWidthC: number,
	range: MeterRange
): Result<At20C> {
	const refused = outside([
		['ohm', ohm, 0.01, 1e7],
		['temperatureC', temperatureC, -40, 150],
		['temperatureHalfWidthC', temperatureHalfWidthC, 0, 50],
		['meter.percent', range.percent, 0, 20],
		['meter.counts', range.counts, 0, 1000],
		['meter.ohmPerCount', range.ohmPerCount, 0, 1e5]
	]);
	if (refused) return refused;
	const factor = 1 + copperAlphaPerK * (temperatureC - 20);
	const meterOhm = rectangular(meterHalfWidthOhm(range, ohm)) / factor;
	const temperatureOhm = (rectangular(temperatureHalfWidthC) * ohm * copperAlphaPerK) / factor ** 2;
	return ok({
		ohm: to20C(ohm, temperatureC),
		uncertaintyOhm: Math.hypot(meterOhm, temperatureOhm),
		meterOhm,
		temperatureOhm
	});
}

/**
 * Difference of two coils read with the same meter on the same range: what the meter is off in proportion is common to
 * both and leaves only its part of the difference; counts and temperatures stay each its own.
 */
export function difference(
	a: { ohm: number; temperatureC: number },
	b: { ohm: number; temperatureC: number },
	temperatureHalfWidthC: number,
	range: MeterRange
): Result<{ ohm: number; uncertaintyOhm: number }> {
	const first = readingTo20C(a.ohm, a.temperatureC, temperatureHalfWidthC, range);
	if (!first.ok) return first;
	const second = readingTo20C(b.ohm, b.temperatureC, temperatureHalfWidthC, range);
	if (!second.ok) return second;
	const ohm = first.value.ohm - second.value.ohm;
	const common = rectangular((range.percent / 100) * Math.abs(ohm));
	const count = rectangular(range.counts * range.ohmPerCount);
	const counts = Math.hypot(to20C(count, a.temperatureC), to20C(count, b.temperatureC));
	const temperatures = Math.hypot(first.value.temperatureOhm, second.value.temperatureOhm);
	return ok({ ohm, uncertaintyOhm: Math.hypot(common, counts, temperatures) });
}
