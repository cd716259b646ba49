import type { Calibration } from '../coil/calibrate.ts';
import { coverage, rectangular } from '../coil/measurement.ts';
import { halfWidthsOf } from '../coil/model.ts';
import { predict, type Prediction } from '../coil/predict.ts';
import { ok, type Refused, type Result } from '../coil/refuse.ts';
import { eNotes, findPeak, peakOf, responseDb, sweepHz, type Circuit } from '../coil/response.ts';
import { shownValue } from '../coil/units.ts';
import type { SpecContent, SpecWire } from './content.ts';
import { specInput, type Dials } from './model.ts';
import { plusMinus, plusMinusOf, spanText } from './words.ts';

/**
 * How specs and measured coils ring into one load, as plain arrays a chart or a table can show. Hertz, decibels over the
 * voltage the strings induce, henries, ohms, farads.
 */

/** Below the lowest string of a bass, and to the end of hearing. */
export const chartFromHz = 50;
export const chartToHz = 20_000;
/** A point each 28th of an octave: finer than a line on paper. */
const chartPoints = 241;
/** Curves between the least and the greatest peak: so many that the space between two is narrower than a peak. */
const familyCurves = 13;
/** Beside this spec's own curve: more cannot be told apart in black and white. */
export const comparedMax = 3;

/** What a curve is drawn for besides this spec's own. */
export type Compared =
	| { key: string; name: string; of: 'spec'; content: SpecContent }
	| {
			key: string;
			name: string;
			of: 'measured';
			resistanceOhm: number;
			inductanceH: number;
			/** null: nobody measured it; then this spec's is taken. */
			coilF: number | null;
	  };

export interface LookAsked {
	dials: Dials;
	/** In place of the spec's own cable, for the look only; null: as the spec says. */
	cableLengthM: number | null;
	wire: SpecWire | null;
	calibration: Calibration | null;
}

export interface CurvePeak {
	hz: number;
	/** Half-widths that hold 19 times in 20; null for a measured coil, whose readings come without them. */
	hzHalf: number | null;
	db: number;
	dbHalf: number | null;
}

export interface Curve {
	key: string;
	name: string;
	of: 'this' | 'spec' | 'measured';
	/** At `Look.hertz`. */
	levelsDb: number[];
	/** Between these it lies, peak and all, as sure as inductance and capacitance are; this spec's own curve only. */
	band: { leastDb: number[]; greatestDb: number[] } | null;
	/** null: it only falls. */
	peak: CurvePeak | null;
	/** At `eNotes`. */
	notesDb: number[];
	inductanceH: number;
	/** Half-width that holds 19 times in 20; null for a measured coil. */
	inductanceHalfH: number | null;
	resistanceOhm: number;
	coilF: number;
	coilMeasured: boolean;
	circuit: Circuit;
}

export interface Look {
	hertz: number[];
	/** This spec's own first. */
	curves: [Curve, ...Curve[]];
	/** What could not be reckoned. */
	leftOut: { key: string; name: string; refused: Refused }[];
	cableLengthM: number;
	cableF: number;
}

/** Everything the chart and its table show. Refused where this spec itself is. */
export function lookAt(
	own: { name: string; content: SpecContent },
	compared: readonly Compared[],
	asked: LookAsked
): Result<Look> {
	const swept = sweepHz(chartFromHz, chartToHz, chartPoints);
	if (!swept.ok) return swept;
	const hertz = swept.value;
	const cableLengthM = asked.cableLengthM ?? own.content.load.cableLengthM;
	const load = { ...own.content.load, cableLengthM };
	const { dials, wire, calibration } = asked;
	const first = specCurve('this', own.name, 'this', { ...own.content, load }, { dials, wire, calibration }, hertz);
	if (!first.ok) return first;
	const curves: Look['curves'] = [first.value];
	const names = toldApart([own.name, ...compared.map(({ name }) => name)]);
	const leftOut: Look['leftOut'] = [];
	for (const [i, other] of compared.slice(0, comparedMax).entries()) {
		const name = names[i + 1]!;
		let curve: Result<Curve>;
		if (other.of === 'spec') {
			// Self-capacitance and losses are the pickup's own; pots, cable and input are what all play into.
			const { coilF, lossOhm } = other.content.load;
			const content = { ...other.content, load: { ...load, coilF, lossOhm } };
			curve = comparedCurve(other.content, { key: other.key, name }, content, dials, hertz);
		} else {
			const { resistanceOhm, inductanceH, coilF } = other;
			const { circuit } = first.value;
			curve = drawn(
				{ key: other.key, name, of: 'measured', coilMeasured: coilF !== null },
				{ ...circuit, resistanceOhm, inductanceH, coilF: coilF ?? circuit.coilF },
				hertz
			);
		}
		if (curve.ok) curves.push(curve.value);
		else leftOut.push({ key: other.key, name, refused: curve });
	}
	return ok({ hertz, curves, leftOut, cableLengthM, cableF: first.value.circuit.cableF });
}

/** Names as they are, and "Evening bridge (2)" for one that stands there already. */
function toldApart(names: readonly string[]): string[] {
	const told: string[] = [];
	for (const name of names) {
		let again = name;
		for (let no = 2; told.includes(again); no += 1) again = `${name} (${no})`;
		told.push(again);
	}
	return told;
}

const remembered = new WeakMap<SpecContent, { asked: string; curve: Result<Curve> }>();

/** Another spec's curve, which stays as it is while this spec's fields are moved: the last one of each is remembered. */
function comparedCurve(
	stored: SpecContent,
	{ key, name }: Pick<Curve, 'key' | 'name'>,
	content: SpecContent,
	dials: Dials,
	hertz: readonly number[]
): Result<Curve> {
	const asked = JSON.stringify([key, name, content.load, dials]);
	const known = remembered.get(stored);
	if (known?.asked === asked) return known.curve;
	const curve = specCurve(key, name, 'spec', content, { dials }, hertz);
	remembered.set(stored, { asked, curve });
	return curve;
}

type Named = Pick<Curve, 'key' | 'name' | 'of' | 'coilMeasured'>;

/** The curve of a circuit whose every value is known. */
function drawn(named: Named, circuit: Circuit, hertz: readonly number[]): Result<Curve> {
	const levels = responseDb(circuit, hertz);
	if (!levels.ok) return levels;
	const notes = responseDb(
		circuit,
		eNotes.map(({ hz }) => hz)
	);
	if (!notes.ok) return notes;
	const peak = peakOf(circuit);
	if (!peak.ok) return peak;
	const { inductanceH, resistanceOhm, coilF } = circuit;
	return ok({
		...named,
		levelsDb: levels.value,
		band: null,
		peak: peak.value && { ...peak.value, hzHalf: null, dbHalf: null },
		notesDb: notes.value,
		inductanceH,
		inductanceHalfH: null,
		resistanceOhm,
		coilF,
		circuit
	});
}

function specCurve(
	key: string,
	name: string,
	of: 'this' | 'spec',
	content: SpecContent,
	asked: Parameters<typeof specInput>[1],
	hertz: readonly number[]
): Result<Curve> {
	const input = specInput(content, asked);
	const predicted = predict(input);
	if (!predicted.ok) return predicted;
	const prediction = predicted.value;
	const { inductanceH, resistanceOhm } = prediction.figures;
	const circuit: Circuit = {
		...input.load!,
		inductanceH: inductanceH.value,
		resistanceOhm: resistanceOhm.value,
		coilF: prediction.coilF!
	};
	const curve = drawn({ key, name, of, coilMeasured: content.load.coilF !== null }, circuit, hertz);
	if (!curve.ok) return curve;
	const { peakHz, peakDb } = prediction;
	return ok({
		...curve.value,
		inductanceHalfH: coverage * inductanceH.uncertainty,
		band:
			of === 'this' ? bandOf(circuit, prediction, rectangular(halfWidthsOf(input).coilCapacitancePart), hertz) : null,
		peak: peakHz &&
			peakDb && {
				hz: peakHz.value,
				hzHalf: coverage * peakHz.uncertainty,
				db: peakDb.value,
				dbHalf: coverage * peakDb.uncertainty
			}
	});
}

/** Lowest and highest hertz at which the peak is to be expected 19 times in 20; null where that is not known. */
export function peakSpanHz(peak: CurvePeak): { fromHz: number; toHz: number } | null {
	if (peak.hzHalf === null) return null;
	// Never at nothing: a figure that unsure still is a frequency.
	return { fromHz: Math.max(peak.hz / 4, peak.hz - peak.hzHalf), toHz: peak.hz + peak.hzHalf };
}

/** Of the bisection that moves a peak to the edge of its span: a thousandth of the span. */
const bandSteps = 12;
/** Standard uncertainties either way within which both edges lie, bent as the square root of L makes them. */
const furthest = 4;
/** Nothing is taken below this part of itself, however unsure it is. */
const leastPart = 0.1;

/**
 * The space between the curves whose peaks stand at the two edges of the peak's span. Inductance and capacitance are moved
 * together, each by as much as it has part in the peak's uncertainty: the likeliest way to come to that edge.
 *
 * @param coilPart relative standard uncertainty of the self-capacitance
 */
function bandOf(
	circuit: Circuit,
	{ peakHz, figures }: Prediction,
	coilPart: number,
	hertz: readonly number[]
): Curve['band'] {
	const inductancePart = figures.inductanceH.uncertainty / figures.inductanceH.value;
	const byCoil = peakHz?.parts.find(({ name }) => name === 'coilCapacitance')?.uncertainty ?? 0;
	const all = peakHz?.uncertainty ?? 0;
	const coilShare = all > 0 ? Math.min(1, byCoil / all) : 0;
	const inductanceShare = Math.sqrt(1 - coilShare ** 2);
	const moved = (t: number): Circuit => ({
		...circuit,
		inductanceH: circuit.inductanceH * Math.max(leastPart, 1 + t * inductanceShare * inductancePart),
		coilF: circuit.coilF * Math.max(leastPart, 1 + t * coilShare * coilPart)
	});
	const reach = (sign: 1 | -1): number => {
		if (!peakHz || all === 0) return sign * coverage;
		const edge = peakHz.value - sign * coverage * all;
		const short = (t: number) => {
			const peak = findPeak(moved(t));
			// A peak that has gone has gone too far.
			return peak !== null && (sign > 0 ? peak.hz > edge : peak.hz < edge);
		};
		let near = 0;
		let far: number = sign * furthest;
		for (let i = 0; i < bandSteps; i += 1) {
			const middle = (near + far) / 2;
			if (short(middle)) near = middle;
			else far = middle;
		}
		return near;
	};
	const from = reach(-1);
	const to = reach(1);
	const leastDb: number[] = [];
	const greatestDb: number[] = [];
	for (let i = 0; i < familyCurves; i += 1) {
		// Zero is among them however unlike the two ways are: the curve itself lies in its band.
		const side = (i - (familyCurves - 1) / 2) / ((familyCurves - 1) / 2);
		const levels = responseDb(moved(side < 0 ? -side * from : side * to), hertz);
		if (!levels.ok) return null;
		levels.value.forEach((db, k) => {
			leastDb[k] = Math.min(leastDb[k] ?? db, db);
			greatestDb[k] = Math.max(greatestDb[k] ?? db, db);
		});
	}
	return { leastDb, greatestDb };
}

/** Below this a volume control counts as turned off. */
export const offDb = -100;

export const isOff = (curve: Curve): boolean => curve.levelsDb.every((db) => db < offDb);

/** Levels the chart shows: alike from look to look, so that a turned pot moves the curve and not the axis. */
export function levelAxisDb(look: Look): { min: number; max: number } {
	const top = Math.max(...look.curves.flatMap(({ levelsDb, band }) => [...levelsDb, ...(band?.greatestDb ?? [])]));
	const max = Math.max(10, 5 * Math.ceil((top + 1) / 5));
	// Of the lowest strings, where every pickup is flat.
	const quietest = Math.min(...look.curves.map(({ levelsDb }) => levelsDb[0]!));
	// Turned off there is nothing to make room for.
	const deep = quietest < -25 && quietest > offDb;
	return { min: deep ? (quietest < -50 ? -80 : -60) : -40, max };
}

/** The same numbers as a sheet: one header, then peaks, notes and the whole sweep, each in its own columns. */
export function sheetOf(look: Look): { header: string[]; rows: (string | number | null)[][] } {
	const [own] = look.curves;
	const header = [
		'What',
		'Frequency (Hz)',
		'Frequency 19 in 20 ± (Hz)',
		'Peak height 19 in 20 ± (dB)',
		...look.curves.map(({ name }) => `${name} (dB over the strings' voltage)`),
		...(own.band ? [`${own.name}, least 19 in 20 (dB)`, `${own.name}, greatest 19 in 20 (dB)`] : [])
	];
	const bandColumns = own.band ? 2 : 0;
	const empty = Array<null>(bandColumns).fill(null);
	const rows: (string | number | null)[][] = [];
	for (const { name, peak } of look.curves) {
		if (!peak) continue;
		const levels = look.curves.map(({ circuit }) => {
			const at = responseDb(circuit, [peak.hz]);
			return at.ok ? six(at.value[0]!) : null;
		});
		rows.push([`Peak of ${name}`, six(peak.hz), sixOrNone(peak.hzHalf), sixOrNone(peak.dbHalf), ...levels, ...empty]);
	}
	eNotes.forEach(({ name, hz }, i) => {
		rows.push([name, six(hz), null, null, ...look.curves.map(({ notesDb }) => six(notesDb[i]!)), ...empty]);
	});
	look.hertz.forEach((hz, i) => {
		const band = own.band ? [six(own.band.leastDb[i]!), six(own.band.greatestDb[i]!)] : [];
		rows.push(['Curve', six(hz), null, null, ...look.curves.map(({ levelsDb }) => six(levelsDb[i]!)), ...band]);
	});
	return { header, rows };
}

/** Six significant digits: more than any reading, and no tails of rounding. */
const six = (value: number): number => Number(value.toPrecision(6));
const sixOrNone = (value: number | null): number | null => (value === null ? null : six(value));

/** "82.4 Hz", "659 Hz", "2.64 kHz": three digits. */
export const hertzText = (hz: number): string =>
	hz < 999.5 ? `${Number(hz.toPrecision(3))} Hz` : `${(hz / 1000).toFixed(hz < 9995 ? 2 : 1)} kHz`;

/** "2.6 kHz ± 0.5", with the digits its half-width leaves it; without one three digits. */
export function peakHzText({ hz, hzHalf }: CurvePeak): string {
	return hzHalf === null
		? hertzText(hz)
		: plusMinus(hz, hzHalf / coverage, 'frequency', hz < 1000 ? 'hertz' : 'kilohertz').text;
}

/** "5.1 H ± 1.5"; three digits where nothing says how sure it is. */
export function inductanceText({
	inductanceH,
	inductanceHalfH
}: Pick<Curve, 'inductanceH' | 'inductanceHalfH'>): string {
	return inductanceHalfH === null
		? shownValue(inductanceH, 'inductance', 'henry', 3)
		: plusMinus(inductanceH, inductanceHalfH / coverage, 'inductance', 'henry').text;
}

/** "2.2–3.1 kHz": where the peak is to be expected, with the digits that leaves; null where that is not known. */
export function peakSpanText({ hz, hzHalf }: CurvePeak): string | null {
	return hzHalf === null ? null : spanText(hz, hzHalf / coverage, 'frequency', hz < 1000 ? 'hertz' : 'kilohertz');
}

/** "+5.1 dB", "−6.2 dB", with a true minus sign. */
export function levelText(db: number, places = 1): string {
	const digits = Math.abs(db).toFixed(places);
	const sign = Number(digits) === 0 ? '' : db > 0 ? '+' : '−';
	return `${sign}${digits} dB`;
}

/** "+5 dB ± 5". */
export function peakDbText({ db, dbHalf }: CurvePeak): string {
	if (dbHalf === null) return levelText(db);
	const { text, number } = plusMinusOf(db, dbHalf / coverage, 'dB');
	return db > 0 && /[1-9]/.test(number) ? `+${text}` : text;
}
