import { expectedBand, judge, type Agreement, type Band, type Expected, type Verdict } from '../coil/band.ts';
import type { Calibration } from '../coil/calibrate.ts';
import { airInductanceH, permeabilityFrom } from '../coil/inductance.ts';
import { to20C } from '../coil/wire.ts';
import {
	coverage,
	meterHalfWidthOhm,
	readingTo20C,
	rectangular,
	type At20C,
	type MeterRange
} from '../coil/measurement.ts';
import { predictResistance, type Contribution } from '../coil/predict.ts';
import { ok, type Result } from '../coil/refuse.ts';
import type { Uncertain } from '../coil/uncertainty.ts';
import { packingFromWidth, windCoil } from '../coil/winding.ts';
import type { SpecContent, SpecWire } from './content.ts';
import { specModel, usualTemperatureC } from './model.ts';

/** What a wound coil is expected to measure, and what its readings say. Ohms at 20 °C, SI. */

/** A resistance as it was read. */
export interface ResistanceRead {
	/** null: beyond every range of the meter. */
	ohm: number | null;
	temperatureC: number;
	temperatureHalfWidthC: number;
	/** Of the meter; null: it was read with none of the workshop's. */
	range: MeterRange | null;
	/** How far it may be off either way where no range says so. */
	halfWidthOhm: number | null;
}

/** How far a reading may be off, in per cent, where nobody said. Common practice, no source. */
const unknownMeterPercent = 1;

/** The range a reading without a meter is worth as much as. */
export function rangeOfReading({ range, halfWidthOhm }: Pick<ResistanceRead, 'range' | 'halfWidthOhm'>): MeterRange {
	if (range) return range;
	return halfWidthOhm === null
		? { upToOhm: Infinity, percent: unknownMeterPercent, counts: 0, ohmPerCount: 0 }
		: { upToOhm: Infinity, percent: 0, counts: 1, ohmPerCount: halfWidthOhm };
}

/** A reading brought to 20 °C; null: open. Next to nothing stays what it is, to be known for a short. */
export function readAt20C(reading: ResistanceRead): Result<At20C | null> {
	const { ohm, temperatureC, temperatureHalfWidthC } = reading;
	if (ohm === null) return ok(null);
	const range = rangeOfReading(reading);
	const at = readingTo20C(ohm, temperatureC, temperatureHalfWidthC, range);
	if (at.ok || at.field !== 'ohm' || ohm >= at.min) return at;
	const meterOhm = rectangular(meterHalfWidthOhm(range, ohm));
	return ok({ ohm: to20C(ohm, temperatureC), uncertaintyOhm: meterOhm, meterOhm, temperatureOhm: 0 });
}

/** What one coil of a spec should measure at exactly 20 °C, and where 19 of 20 such coils lie. */
export interface ExpectedCoil extends Expected, Band {
	parts: Uncertain<Contribution>['parts'];
}

/**
 * The resistance of `predictCoil` without the rest of it, at 20 °C sharp: how warm the coil was belongs to the reading it
 * is compared with, and is in that reading's own uncertainty.
 *
 * @param turns on the bobbin
 */
export function expectedCoil(
	content: SpecContent,
	turns: number,
	{ wire = null, calibration = null }: { wire?: SpecWire | null; calibration?: Calibration | null } = {}
): Result<ExpectedCoil> {
	const model = specModel(content, wire);
	const predicted = predictResistance({
		...model,
		halfWidths: { ...model.halfWidths, temperatureC: 0 },
		turns: [turns],
		connection: 'single',
		temperatureC: usualTemperatureC,
		calibration
	});
	if (!predicted.ok) return predicted;
	const { value: ohm, uncertainty: uncertaintyOhm, parts } = predicted.value;
	const expected = { ohm, uncertaintyOhm };
	const band = expectedBand(expected);
	return band.ok ? ok({ ...expected, ...band.value, parts }) : band;
}

/** Whether a reading agrees with what was expected. */
export function verdictOf(reading: ResistanceRead, expected: Expected): Result<Verdict> {
	const at = readAt20C(reading);
	return at.ok ? judge(at.value, expected) : at;
}

export type Stage = 'wound' | 'leads' | 'tape' | 'assembled' | 'covered';

/** What comes next by where the coil stands; a verdict that sends back to the meter says so in its own sentence. */
const onward: Record<Stage, string> = {
	wound: 'Solder the leads on, then read it again.',
	leads: 'Put the tape on, then read it again.',
	tape: 'Put it together, then read it again.',
	assembled: 'Read it once more after the cover, if it gets one.',
	covered: 'Nothing is left to do.'
};

export function nextStep(agreement: Agreement, stage: Stage): string | null {
	switch (agreement) {
		case 'within':
			return onward[stage];
		case 'open':
			return stage === 'wound'
				? 'Clean both ends of the wire to bare copper and read it again; wind on only if it reads.'
				: 'Read it at the coil’s own ends: if it reads there, mend the joint; if not, set the coil aside.';
		case 'short':
			return 'Part the two leads, hold the probes on one each, and read it again.';
		default:
			return null;
	}
}

/** The packing that an outer width means; refused where no packing explains it. */
export const packingOf = (
	content: SpecContent,
	wire: SpecWire | null,
	turns: number,
	outerWidthM: number
): Result<number> =>
	packingFromWidth({ ...specModel(content, wire), turns, temperatureC: usualTemperatureC }, outerWidthM);

/** What iron and magnets multiply the inductance by, from a measured one. */
export function permeabilityOf(
	content: SpecContent,
	wire: SpecWire | null,
	turns: number,
	inductanceH: number
): Result<number> {
	const model = specModel(content, wire);
	const wound = windCoil({ ...model, turns, temperatureC: usualTemperatureC });
	if (!wound.ok) return wound;
	const { straightM, endDiameterM, traverseM } = model.bobbin;
	const air = airInductanceH({ straightM, endDiameterM, traverseM, windingDepthM: wound.value.windingDepthM }, turns);
	return air.ok ? permeabilityFrom(inductanceH, air.value) : air;
}

export interface Side {
	agreement: Extract<Agreement, 'within' | 'above' | 'below'>;
	/** Measured less predicted. */
	off: number;
}

/**
 * Where a measured width or inductance stands against the predicted one: their difference against the expanded uncertainty
 * of both (JCGM 100, 5.1.2).
 *
 * @param uncertainty standard, of the measured value
 */
export function sideOf(
	measured: number,
	uncertainty: number,
	predicted: Pick<Uncertain, 'value' | 'uncertainty'>
): Side {
	const off = measured - predicted.value;
	const both = coverage * Math.hypot(uncertainty, predicted.uncertainty);
	return { agreement: Math.abs(off) <= both ? 'within' : off > 0 ? 'above' : 'below', off };
}
