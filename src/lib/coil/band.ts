import { coverage } from './measurement.ts';
import { ok, outside, type Result } from './refuse.ts';

/** What a coil is expected to measure, and whether it does. Ohms at one temperature. */
export interface Expected {
	ohm: number;
	/** Standard uncertainty. */
	uncertaintyOhm: number;
}

export interface Band {
	fromOhm: number;
	toOhm: number;
}

/** Where 19 of 20 such coils lie. */
export function expectedBand(expected: Expected): Result<Band> {
	const refused = expectedRefused(expected);
	if (refused) return refused;
	const half = coverage * expected.uncertaintyOhm;
	return ok({ fromOhm: Math.max(0, expected.ohm - half), toOhm: expected.ohm + half });
}

const expectedRefused = ({ ohm, uncertaintyOhm }: Expected) =>
	outside([
		['expected.ohm', ohm, 0.001, 1e9],
		['expected.uncertaintyOhm', uncertaintyOhm, 0, ohm]
	]);

/** `open`: no path through the wire. `short`: a path beside it. */
export type Agreement = 'within' | 'above' | 'below' | 'open' | 'short';

export interface Verdict {
	agreement: Agreement;
	/** Reading over expected, less one; null when open. */
	deviation: number | null;
	/** Deviation over what both may be off together, 1 at the edge; null when open. */
	ofBand: number | null;
}

/** A coil that measures this many times what it should has no whole wire left, only what leaks. */
const openTimes = 20;
/** Below this part of what it should be, leads touch: a coil with shorted turns is not that far off. */
const shortPart = 0.05;

/**
 * Whether a reading agrees with what was expected: their difference against the expanded uncertainty of both
 * (JCGM 100, 5.1.2; as the En number of ISO/IEC 17043).
 *
 * @param reading brought to the temperature of `expected`; null: beyond every range of the meter
 */
export function judge(reading: { ohm: number; uncertaintyOhm: number } | null, expected: Expected): Result<Verdict> {
	const refused =
		expectedRefused(expected) ??
		(reading &&
			outside([
				['reading.ohm', reading.ohm, 0, 1e12],
				['reading.uncertaintyOhm', reading.uncertaintyOhm, 0, 1e12]
			]));
	if (refused) return refused;
	if (reading === null || reading.ohm > openTimes * expected.ohm)
		return ok({ agreement: 'open', deviation: null, ofBand: null });
	const difference = reading.ohm - expected.ohm;
	const both = coverage * Math.hypot(reading.uncertaintyOhm, expected.uncertaintyOhm);
	// With no uncertainty on either side any difference is beyond it, and none is not.
	const ofBand = difference === 0 ? 0 : Math.min(1e6, Math.abs(difference) / Math.max(both, 1e-12));
	const side = difference > 0 ? 'above' : 'below';
	const agreement = reading.ohm < shortPart * expected.ohm ? 'short' : ofBand <= 1 ? 'within' : side;
	return ok({ agreement, deviation: difference / expected.ohm, ofBand });
}
