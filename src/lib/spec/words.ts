import type { Verdict } from '../coil/band.ts';
import { coverage } from '../coil/measurement.ts';
import type { Contribution } from '../coil/predict.ts';
import type { Refused } from '../coil/refuse.ts';
import type { Part, Uncertain } from '../coil/uncertainty.ts';
import { quantities, shownValue, type Quantity, type Typed, type UnitOf, type UnitPreference } from '../coil/units.ts';

/**
 * How figures and what is wrong with them are said. Every page that shows a figure with its ± takes it from here, so that
 * the same figure reads the same wherever it stands.
 */

/** "−1,440.5": thousands set apart, a true minus sign, that many decimal places; negative places round to tens and hundreds. */
export function decimalText(value: number, places: number): string {
	const step = 10 ** Math.max(0, -places);
	const fixed = (Math.round(Math.abs(value) / step) * step).toFixed(0);
	const text = places > 0 ? Math.abs(value).toFixed(places) : fixed;
	const [whole = '0', rest] = text.split('.');
	const set = whole.replace(/\B(?=(\d{3})+$)/g, ',') + (rest === undefined ? '' : `.${rest}`);
	return value < 0 && /[1-9]/.test(set) ? `−${set}` : set;
}

/** An uncertainty whose first digit is below this keeps a second one. */
const twoDigitsBelow = 4;
/** The ends of a range are read as round figures: they keep a second digit only where the first alone would mislead. */
const spanTwoDigitsBelow = 3;

/**
 * Decimal places an uncertainty deserves, and the value with it: two significant digits where its first is 1 to 3, else one.
 * 0.1 in place of 0.14 would be off by a third, and the last digit of 7.88 ± 0.31 still tells 50 turns from 100 (common
 * practice; JCGM 100, 7.2.6 asks for two at most). Negative: tens, hundreds…
 */
export function placesFor(expanded: number, below = twoDigitsBelow): number {
	const [digits = '1', power = '0'] = expanded.toExponential(9).split('e');
	return (Number(digits) < below ? 1 : 0) - Number(power);
}

export interface PlusMinus {
	/** "7.5", "7,470": digits as the uncertainty deserves. */
	number: string;
	/** "kΩ"; empty for a bare figure. */
	unit: string;
	/** "7.5 kΩ". */
	value: string;
	/** "0.7": 19 in 20, in the same unit. null: the figure is exact. */
	half: string | null;
	/** "7.5 kΩ ± 0.7". */
	text: string;
}

/** Digits of a figure that carries no uncertainty. */
const exactDigits = 4;

const joined = (number: string, unit: string): string =>
	unit === 'AWG' ? `AWG ${number}` : unit === '' ? number : `${number} ${unit}`;

/** A figure in plain numbers of its unit. `uncertainty` is standard; shown is `coverage` times it. */
export function plusMinusOf(value: number, uncertainty: number, unit = ''): PlusMinus {
	const expanded = coverage * Math.abs(uncertainty);
	if (!(expanded > 0) || !Number.isFinite(expanded)) {
		const places = value === 0 ? 0 : exactDigits - 1 - Math.floor(Math.log10(Math.abs(value)));
		const text = decimalText(value, places);
		const number = text.includes('.') ? text.replace(/\.?0+$/, '') : text;
		return { number, unit, value: joined(number, unit), half: null, text: joined(number, unit) };
	}
	const places = placesFor(expanded);
	const number = decimalText(value, places);
	const half = decimalText(expanded, places);
	return { number, unit, value: joined(number, unit), half, text: `${joined(number, unit)} ± ${half}` };
}

const converted = <Q extends Quantity>(value: number, uncertainty: number, quantity: Q, unit: UnitOf<Q>) => {
	const { fromSi, symbol } = (quantities[quantity] as Record<string, { symbol: string; fromSi(si: number): number }>)[
		unit
	]!;
	const spread = uncertainty === 0 ? 0 : (fromSi(value + uncertainty) - fromSi(value - uncertainty)) / 2;
	return { value: fromSi(value), spread: Math.abs(spread), symbol };
};

/**
 * A figure with its ± in the unit a person prefers, to the digits it deserves.
 *
 * @param value SI
 * @param uncertainty standard, SI; what is shown is twice it, 19 in 20
 */
export function plusMinus<Q extends Quantity>(
	value: number,
	uncertainty: number,
	quantity: Q,
	unit: UnitOf<Q>
): PlusMinus {
	const { value: own, spread, symbol } = converted(value, uncertainty, quantity, unit);
	return plusMinusOf(own, spread, symbol);
}

/** From where to where 19 of 20 lie, "2.2–3.1 kHz": for what is a range rather than a figure with a small ±. */
export function spanText<Q extends Quantity>(value: number, uncertainty: number, quantity: Q, unit: UnitOf<Q>): string {
	const { value: own, spread, symbol } = converted(value, uncertainty, quantity, unit);
	if (spread === 0) return plusMinusOf(own, 0, symbol).value;
	const half = coverage * spread;
	const places = placesFor(half, spanTwoDigitsBelow);
	return joined(`${decimalText(Math.max(0, own - half), places)}–${decimalText(own + half, places)}`, symbol);
}

/** "+2 to +9 dB". */
export function decibelSpanText(value: number, uncertainty: number): string {
	const half = coverage * uncertainty;
	const places = half > 0 ? placesFor(half, spanTwoDigitsBelow) : 1;
	const signed = (db: number) => {
		const text = decimalText(db, places);
		return db > 0 && /[1-9]/.test(text) ? `+${text}` : text;
	};
	return half > 0 ? `${signed(value - half)} to ${signed(value + half)} dB` : `${signed(value)} dB`;
}

/** What a figure's ± comes from, in words of the trade. */
export const contributionWords: Readonly<Record<Contribution, string>> = {
	diameter: 'wire diameter',
	overallDiameter: 'overall diameter',
	ohmPerM: 'Ω/m of the spool',
	packing: 'packing',
	bobbin: 'bobbin size',
	temperature: 'temperature',
	calibration: 'readings of your kept coils',
	scatter: 'spread from coil to coil',
	air: 'how evenly the turns lie',
	permeability: 'cores',
	coilCapacitance: 'self-capacitance',
	losses: 'losses'
};

export interface Share {
	words: string;
	/** Part of the figure's uncertainty squared; all shares of a figure add up to 1. */
	share: number;
}

/** What a figure's uncertainty comes from, largest first. */
export function shares(parts: readonly Part<Contribution>[]): Share[] {
	const total = parts.reduce((sum, part) => sum + part.uncertainty ** 2, 0);
	if (total === 0) return [];
	return [...parts]
		.sort((a, b) => b.uncertainty - a.uncertainty)
		.map((part) => ({ words: contributionWords[part.name], share: part.uncertainty ** 2 / total }));
}

/** Two at most, and only what matters: a tenth of the whole or more. */
const mattersMin = 0.1;

/** "wire diameter, packing": what contributes most; empty where nothing does. */
export const mostWords = (figure: Pick<Uncertain<Contribution>, 'parts'>): string =>
	shares(figure.parts)
		.slice(0, 2)
		.filter(({ share }) => share >= mattersMin)
		.map(({ words }) => words)
		.join(', ');

/** "91 %"; a small one is not said to be none. */
export const shareText = (share: number): string =>
	share < 0.01 ? 'under 1\u00a0%' : `${Math.round(100 * share)}\u00a0%`;

interface FieldWords {
	/** Starts the sentence. */
	name: string;
	show: (si: number, units: UnitPreference) => string;
	/** What to do. */
	advice: string;
}

const asLength = (si: number, units: UnitPreference) => shownValue(si, 'length', units.length, 4);
const asWire = (si: number, units: UnitPreference) => shownValue(si, 'wireDiameter', units.wireDiameter, 4);
/** Over the enamel no gauge is said, only a size. */
const asOverall = (si: number, units: UnitPreference) =>
	shownValue(si, 'length', units.wireDiameter === 'inch' ? 'inch' : units.length, 4);
const asOhm = (si: number) => {
	const unit = si >= 1e6 ? 'megohm' : si >= 1000 ? 'kilohm' : 'ohm';
	return shownValue(si, 'resistance', unit, 4);
};
const asFarad = (si: number) => shownValue(si, 'capacitance', si >= 1e-8 ? 'nanofarad' : 'picofarad', 4);
const asPart = (si: number) => shownValue(si, 'part', 'percent', 3);
const asTemperature = (si: number, units: UnitPreference) => shownValue(si, 'temperature', units.temperature, 4);
const asKelvin = (si: number, units: UnitPreference) =>
	units.temperature === 'fahrenheit' ? `${Number((1.8 * si).toFixed(2))} °F` : `${Number(si.toFixed(2))} °C`;
const asMass = (si: number, units: UnitPreference) => shownValue(si, 'mass', units.mass, 4);
const asTurns = (turns: number) => decimalText(Math.floor(turns), 0);
const asFigure = (figure: number) =>
	Math.abs(figure) >= 1e4 ? decimalText(figure, 0) : `${Number(figure.toPrecision(4))}`;
const asDecibels = (db: number) => `${Number(db.toPrecision(3))} dB`;
const asHertz = (hz: number) => `${decimalText(hz, hz < 10 ? 1 : 0)} Hz`;

const lengthOf = 'Check the figure and its unit.';
const half = (of: string, show: FieldWords['show']): FieldWords => ({
	name: `How far ${of} may be off`,
	show,
	advice: 'A third of the figure is the most that can be reckoned with.'
});

const fields: Readonly<Record<string, FieldWords>> = {
	'bobbin.straightM': { name: 'The core’s straight length', show: asLength, advice: `0 is a round core. ${lengthOf}` },
	'bobbin.endDiameterM': { name: 'The core’s width', show: asLength, advice: lengthOf },
	'bobbin.traverseM': {
		name: 'The traverse',
		show: asLength,
		advice: 'It is what the guide stops leave between the flanges.'
	},
	'bobbin.flangeOuterM': {
		name: 'The flange’s width',
		show: asLength,
		advice: 'It is measured over all and cannot be less than the core; leave it empty where there is no flange.'
	},
	'wire.awg': {
		name: 'The gauge',
		show: (si) => `AWG ${asFigure(si)}`,
		advice: 'Take another gauge, or give the diameter.'
	},
	'wire.diameterM': { name: 'The bare wire diameter', show: asWire, advice: lengthOf },
	'wire.overallDiameterM': {
		name: 'The overall diameter',
		show: asOverall,
		advice: 'Enamel makes wire thicker, never thinner: give it a little over the bare diameter.'
	},
	'wire.ohmPerM': {
		name: 'The measured Ω/m',
		show: (si, units) => shownValue(si, 'ohmPerLength', units.length === 'inch' ? 'ohmPerFoot' : 'ohmPerM', 4),
		advice: 'Leave it empty to reckon by the diameter.'
	},
	packing: { name: 'The packing', show: asFigure, advice: 'Scatter wound by hand is about 0.7 to 0.9.' },
	turns: { name: 'The turns', show: asTurns, advice: 'More would be a winding deeper than any pickup has.' },
	'turns.length': { name: 'The number of coils', show: asFigure, advice: 'A pickup here has one coil or two.' },
	temperatureC: { name: 'The temperature', show: asTemperature, advice: lengthOf },
	spacingM: {
		name: 'The distance between the middles of the two coils',
		show: asLength,
		advice: 'Closer, the coils would stand in one another: set them further apart or wind fewer turns.'
	},
	effectivePermeability: {
		name: 'What the cores multiply the inductance by',
		show: asFigure,
		advice: 'It is 1 without iron and about 2.0 to 2.8 with steel slugs or screws.'
	},
	'load.volumePotOhm': { name: 'The volume pot', show: asOhm, advice: 'Usual are 250 kΩ and 500 kΩ.' },
	'load.volume': { name: 'The volume control', show: asPart, advice: 'It turns from 0 to 10.' },
	'load.tonePotOhm': { name: 'The tone pot', show: asOhm, advice: 'Leave it empty where there is none.' },
	'load.toneCapF': { name: 'The tone capacitor', show: asFarad, advice: 'Usual is 22 nF.' },
	'load.tone': { name: 'The tone control', show: asPart, advice: 'It turns from 0 to 10.' },
	'load.cableF': {
		name: 'The cable’s capacitance',
		show: asFarad,
		advice: 'Check the length and the capacitance per metre.'
	},
	'load.inputOhm': { name: 'The input it plays into', show: asOhm, advice: 'Usual is 1 MΩ.' },
	'load.coilF': {
		name: 'The self-capacitance of the coil',
		show: asFarad,
		advice: 'Leave it empty where nobody measured it.'
	},
	'load.lossOhm': { name: 'The loss across the coil', show: asOhm, advice: 'Leave it empty where there is none.' },
	'halfWidths.diameterM': half('the bare diameter', asLength),
	'halfWidths.overallDiameterM': half('the overall diameter', asOverall),
	'halfWidths.ohmPerMPart': half('the measured Ω/m', asPart),
	'halfWidths.packing': half('the packing', asFigure),
	'halfWidths.bobbinPart': half('the bobbin', asPart),
	'halfWidths.temperatureC': half('the temperature', asKelvin),
	'halfWidths.airPart': half('the evenness of the turns', asPart),
	'halfWidths.permeabilityPart': half('the cores', asPart),
	'halfWidths.coilCapacitancePart': half('the self-capacitance', asPart),
	'halfWidths.lossesDb': half('the peak’s height', asDecibels),
	'kept.length': {
		name: 'The number of kept coils',
		show: asFigure,
		advice: 'With none, the figures are the model’s own.'
	},
	'kept.turns': { name: 'The turns of a kept coil', show: asTurns, advice: 'Correct them in the bench book.' },
	'kept.ohmAt20C': {
		name: 'The resistance of a kept coil',
		show: asOhm,
		advice: 'A coil so far off is open, shorted, or of another wire or bobbin: leave its reading out.'
	},
	'kept.uncertaintyOhm': {
		name: 'The ± of a kept coil’s reading',
		show: asOhm,
		advice: 'Check the meter it was read with.'
	},
	'kept.meterOhm': {
		name: 'The meter’s part of a kept coil’s ±',
		show: asOhm,
		advice: 'Check the meter it was read with.'
	},
	resistanceOhm: {
		name: 'The wanted resistance',
		show: asOhm,
		advice: 'Take thinner wire for more of it, thicker wire for less.'
	},
	lengthM: {
		name: 'The length of wire',
		show: (si, units) => shownValue(si, 'length', units.length === 'inch' ? 'foot' : 'm', 4),
		advice: lengthOf
	},
	marginM: {
		name: 'The margin to the flange',
		show: asLength,
		advice: 'There is no more room than that above the core.'
	},
	copperKg: { name: 'The wire left', show: asMass, advice: lengthOf },
	perimeterM: { name: 'The core’s length around', show: asLength, advice: lengthOf },
	measuredOuterWidthM: {
		name: 'The measured outer width',
		show: asLength,
		advice: 'It does not go with these turns of this wire on this bobbin: measure again, or check the overall diameter.'
	},
	measuredH: {
		name: 'The measured inductance',
		show: (si) => shownValue(si, 'inductance', si >= 0.1 ? 'henry' : 'millihenry', 3),
		advice: 'Check the meter’s range and that the coil is not open or shorted.'
	},
	ohm: { name: 'The reading', show: asOhm, advice: 'Check the number and its unit: Ω or kΩ.' },
	temperatureHalfWidthC: {
		name: 'How far the temperature may be off',
		show: asKelvin,
		advice: '2 °C either way is usual in a room.'
	},
	'meter.percent': {
		name: 'The meter’s per cent',
		show: (si) => `${asFigure(si)} %`,
		advice: 'It stands in the meter’s manual.'
	},
	'meter.counts': { name: 'The meter’s counts', show: asFigure, advice: 'They stand in the meter’s manual.' },
	'meter.ohmPerCount': { name: 'One count of the meter', show: asOhm, advice: 'It is one step of the last digit.' },
	'expected.ohm': { name: 'What is expected', show: asOhm, advice: 'Check the spec’s figures.' },
	'expected.uncertaintyOhm': { name: 'The ± of what is expected', show: asOhm, advice: 'Check the spec’s figures.' },
	'reading.ohm': { name: 'The reading', show: asOhm, advice: 'Check the number and its unit: Ω or kΩ.' },
	'reading.uncertaintyOhm': { name: 'The ± of the reading', show: asOhm, advice: 'Check the meter’s figures.' },
	inductanceH: { name: 'The inductance', show: (si) => shownValue(si, 'inductance', 'henry', 3), advice: lengthOf },
	'large.hz': {
		name: 'The peak with the larger capacitor',
		show: asHertz,
		advice: 'It lies below that with the smaller.'
	},
	'small.hz': {
		name: 'The peak with the smaller capacitor',
		show: asHertz,
		advice: 'It lies above that with the larger.'
	},
	'large.addedF': { name: 'The larger capacitor', show: asFarad, advice: 'It must be larger than the other.' },
	'small.addedF': { name: 'The smaller capacitor', show: asFarad, advice: 'It must be smaller than the other.' },
	coilF: { name: 'The self-capacitance that follows', show: asFarad, advice: 'Measure both peaks again.' }
};

/** Parts of the computation name what they were given: the last word is the field, the coil’s number is set apart. */
function wordsOf(field: string): FieldWords {
	const plain = field.replace(/\[\d+\]/g, '').replace(/\.turns\.length$/, '.turns');
	const found = fields[plain] ?? fields[`bobbin.${plain}`];
	return found ?? { name: 'A figure', show: asFigure, advice: lengthOf };
}

/** "2nd coil" where the field is of one coil of two. */
const coilOf = (field: string): string => {
	const at = /^turns\[(\d+)\]/.exec(field);
	return at ? ` of coil ${Number(at[1]) + 1}` : '';
};

/** Beyond this a range has no upper end worth saying. */
const endless = 1e9;

/**
 * Why the computation takes no such figure: the field, the range in the person's units, and what to do. What was typed
 * stays where it was typed.
 */
export function refusedSentence(refused: Refused, units: UnitPreference): string {
	const { field, min, max, got } = refused;
	const { name, show, advice } = wordsOf(field);
	if (field === 'bobbin.flangeOuterM' && got === null) {
		return 'This bobbin has no flange to fill up to. Give the width of its flange first.';
	}
	const subject = `${name}${coilOf(field)}`;
	const is = /^The (?:turns|meter’s counts)/.test(name) ? 'they are' : 'it is';
	const came = got === null ? 'there is no number' : `${is} ${show(got, units).replace(/^-/, '−')}`;
	const range =
		max >= endless || (field === 'spacingM' && got !== null && got < min)
			? `must be at least ${show(min, units)}`
			: min === max
				? `must be ${show(min, units)}`
				: min === 0
					? `must be ${show(max, units)} at most`
					: `must lie between ${show(min, units)} and ${show(max, units)}`;
	return `${subject} ${range}; ${came}. ${advice}`;
}

export interface AgreementWords {
	/** "Agrees", "Too high", "Open". */
	word: string;
	sentence: string;
	/** Nothing to do. */
	good: boolean;
}

/** What a verdict means and what to do about it. */
export function agreementWords(verdict: Verdict): AgreementWords {
	const { agreement, deviation, ofBand } = verdict;
	const off = Math.abs(deviation ?? 0);
	const by = off < 0.0005 ? null : `${decimalText(100 * off, off < 0.1 ? 1 : 0)} %`;
	const side = (deviation ?? 0) > 0 ? 'above' : 'below';
	const times =
		ofBand === null || ofBand < 1.05 ? 'just beyond' : ofBand < 20 ? `${decimalText(ofBand, 1)} times` : 'many times';
	const beyond = times === 'just beyond' ? 'just beyond what both may be off' : `${times} what both may be off`;
	switch (agreement) {
		case 'within':
			return {
				word: 'Agrees',
				sentence: by
					? `${by} ${side} what was expected, within what both may be off.`
					: 'It measures what was expected.',
				good: true
			};
		case 'above':
			return {
				word: 'Too high',
				sentence: `${by ?? 'A little'} above what was expected, ${beyond}: stretched or thinner wire, a poor joint, or more turns than were counted. Let it cool, and read it again.`,
				good: false
			};
		case 'below':
			return {
				word: 'Too low',
				sentence: `${by ?? 'A little'} below what was expected, ${beyond}: shorted turns, thicker wire, or fewer turns than were counted. Keep fingers off both probe tips, and read it again.`,
				good: false
			};
		case 'open':
			return {
				word: 'Open',
				sentence: 'No path through the wire: it is broken, or its enamel was not taken off where the lead is soldered.',
				good: false
			};
		case 'short':
			return {
				word: 'Short',
				sentence: 'Far too little for a coil: its leads touch, or the meter read its own leads.',
				good: false
			};
	}
}

/** Why what was typed is no value of its quantity. */
export function typedSentence(why: Extract<Typed, { ok: false }>['why'], typed: string): string {
	const text = typed.trim();
	switch (why) {
		case 'number':
			return text === '' ? 'Nothing was typed.' : `“${text}” is no number that can be read. It was kept as typed.`;
		case 'unit':
			return `“${text}” has a unit that does not belong here. It was kept as typed.`;
		case 'two-meanings':
			return `“${text}” can be read two ways: write the decimals with a point. It was kept as typed.`;
	}
}
