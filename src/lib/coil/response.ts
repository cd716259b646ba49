import { within } from './limits.ts';
import { ok, outside, sound, type Refused, type Result } from './refuse.ts';

/**
 * The electric response of a pickup into its controls, cable and input. Ohms, henries, farads, hertz.
 *
 * The coil is L and R in series with its self-capacitance across the whole, and a loss (cover, slugs) across L. The volume
 * pot is a divider with cable and input on its wiper; the tone pot with its capacitor hangs before it.
 */
export interface Circuit {
	inductanceH: number;
	resistanceOhm: number;
	/** Self-capacitance of the coil. */
	coilF: number;
	/** Eddy losses as a resistance across L; null: none. */
	lossOhm: number | null;
	volumePotOhm: number;
	/** Part of the volume pot's track below the wiper: 1 full up, 0 off. By resistance, not by the dial. */
	volume: number;
	/** null: no tone control. */
	tonePotOhm: number | null;
	toneCapF: number;
	/** Part of the tone pot's track in series with its capacitor: 1 full up. */
	tone: number;
	cableF: number;
	inputOhm: number;
}

/** What a pickup plays into, without the pickup. */
export type Load = Omit<Circuit, 'inductanceH' | 'resistanceOhm'>;

/** Where to start: two 500 kΩ pots, 22 nF, 1 MΩ, about 500 pF of cable, 110 pF of coil. From memory; all editable. */
export const usualLoad: Load = {
	lossOhm: null,
	coilF: 110e-12,
	volumePotOhm: 500e3,
	volume: 1,
	tonePotOhm: 500e3,
	toneCapF: 22e-9,
	tone: 1,
	cableF: 500e-12,
	inputOhm: 1e6
};

/** Loss across L that a cover adds. From memory, in direction more than in size; editable. */
export const covers: readonly { key: string; name: string; lossOhm: number | null }[] = [
	{ key: 'none', name: 'no cover', lossOhm: null },
	{ key: 'plastic', name: 'plastic', lossOhm: null },
	{ key: 'nickel-silver', name: 'nickel silver', lossOhm: 1e6 },
	{ key: 'brass', name: 'brass', lossOhm: 250e3 }
];

/** Capacitance of a guitar cable per metre: from memory, 80 to 160 pF. */
export const usualCableFPerM = 100e-12;

/**
 * Self-capacitance to reckon with where none was measured, at a packing of 0.80: in the middle of 60 to 200 pF (from
 * memory), and no better than ±30 %.
 */
const usualCoilF = 110e-12;

/**
 * Self-capacitance of a coil by its packing: turns that lie looser are further apart. Right in direction; the square is
 * chosen so that what windings are packed to spans what coils are measured to have.
 */
export const coilCapacitanceF = (packing: number): number => sound(usualCoilF * (packing / 0.8) ** 2);

/** Relative half-width of a self-capacitance that was not measured. */
export const coilCapacitanceClaim = 0.3;

export function loadRefused(load: Load): Refused | null {
	return outside([
		within('load.volumePotOhm', load.volumePotOhm),
		within('load.volume', load.volume),
		within('load.tonePotOhm', load.tonePotOhm ?? 1e5),
		within('load.toneCapF', load.toneCapF),
		within('load.tone', load.tone),
		within('load.cableF', load.cableF),
		within('load.inputOhm', load.inputOhm),
		within('load.coilF', load.coilF),
		within('load.lossOhm', load.lossOhm ?? 1e6)
	]);
}

export function circuitRefused(circuit: Circuit): Refused | null {
	return (
		outside([
			['inductanceH', circuit.inductanceH, 1e-9, 10_000],
			['resistanceOhm', circuit.resistanceOhm, 0, 1e9]
		]) ?? loadRefused(circuit)
	);
}

/**
 * Magnitude of output over the string's voltage, as a plain ratio. The circuit must have been checked. Written out in real
 * and imaginary parts, each in a form that divides by nothing that may be zero.
 */
function magnitude(c: Circuit, hz: number): number {
	const w = 2 * Math.PI * hz;
	// Source: R + (jωL ∥ loss) = R + jωL/(1 + jωL/loss).
	const reactance = w * c.inductanceH;
	const lossy = c.lossOhm === null ? 0 : reactance / c.lossOhm;
	const sourceRe = c.resistanceOhm + (reactance * lossy) / (1 + lossy * lossy);
	const sourceIm = reactance / (1 + lossy * lossy);
	// On the wiper: lower track ∥ input ∥ cable.
	const lower = c.volume * c.volumePotOhm;
	const parallel = (lower * c.inputOhm) / (lower + c.inputOhm);
	const slow = w * c.cableF * parallel;
	const wiperRe = parallel / (1 + slow * slow);
	const wiperIm = (-parallel * slow) / (1 + slow * slow);
	// The whole volume control as an impedance: upper track and wiper in series.
	const upper = (1 - c.volume) * c.volumePotOhm;
	const pot2 = (upper + wiperRe) ** 2 + wiperIm ** 2;
	// Across the coil: volume control, self-capacitance, tone control jωC/(1 + jωCR).
	let acrossRe = (upper + wiperRe) / pot2;
	let acrossIm = -wiperIm / pot2 + w * c.coilF;
	if (c.tonePotOhm !== null) {
		const susceptance = w * c.toneCapF;
		const turned = susceptance * c.tone * c.tonePotOhm;
		acrossRe += (susceptance * turned) / (1 + turned * turned);
		acrossIm += susceptance / (1 + turned * turned);
	}
	const top = Math.hypot(1 + sourceRe * acrossRe - sourceIm * acrossIm, sourceRe * acrossIm + sourceIm * acrossRe);
	return Math.hypot(wiperRe, wiperIm) / Math.sqrt(pot2) / top;
}

/** Quieter than this nothing is told apart: a volume control turned off has no decibels. */
const silenceDb = -200;
const decibels = (ratio: number): number => Math.max(silenceDb, 20 * Math.log10(ratio));

/** Decibels over the string's voltage at each frequency; `silenceDb` where nothing comes through. */
export function responseDb(circuit: Circuit, hertz: readonly number[]): Result<number[]> {
	const refused = circuitRefused(circuit) ?? outside(hertz.map((hz, i) => [`hertz[${i}]`, hz, 0, 1e7] as const));
	if (refused) return refused;
	return ok(hertz.map((hz) => decibels(magnitude(circuit, hz))));
}

/** `count` frequencies from one to another, evenly spaced by ear. */
export function sweepHz(fromHz: number, toHz: number, count: number): Result<number[]> {
	const refused = outside([
		['fromHz', fromHz, 0.1, 1e6],
		['toHz', toHz, fromHz, 1e7],
		['count', count, 2, 10_000]
	]);
	if (refused) return refused;
	return ok(Array.from({ length: count }, (_, i) => fromHz * (toHz / fromHz) ** (i / (Math.floor(count) - 1))));
}

export interface Peak {
	hz: number;
	/** Over the string's voltage, as all levels of the response. */
	db: number;
}

/** Where a peak is looked for: from below the lowest string to beyond hearing and any coil without a cable. */
const sweepFromHz = 20;
const sweepToHz = 200_000;
const sweepSteps = 128;
/** A rise smaller than this over what lies below it is no peak but rounding, or the flat top of a roll-off. */
const peakRiseDb = 0.001;

/**
 * Where and how high it resonates: the highest place of the curve that has lower ones on both sides, or null where it only
 * falls, as with the pots turned down. Found on a sweep, then by golden section, so that any position of the pots is covered.
 */
export function peakOf(circuit: Circuit): Result<Peak | null> {
	const refused = circuitRefused(circuit);
	return refused ?? ok(findPeak(circuit));
}

/** `peakOf` for a circuit that has been checked. */
export function findPeak(circuit: Circuit): Peak | null {
	const at = (logHz: number) => magnitude(circuit, Math.exp(logHz));
	const from = Math.log(sweepFromHz);
	const step = (Math.log(sweepToHz) - from) / sweepSteps;
	let [before, here] = [at(from), at(from + step)];
	let lowest = Math.min(before, here);
	let best = -1;
	let bestSize = 0;
	let bestLowest = 0;
	for (let i = 1; i < sweepSteps; i += 1) {
		const after = at(from + (i + 1) * step);
		if (here > before && here >= after && here > bestSize) [best, bestSize, bestLowest] = [i, here, lowest];
		lowest = Math.min(lowest, after);
		[before, here] = [here, after];
	}
	if (best < 0) return null;
	let low = from + (best - 1) * step;
	let high = from + (best + 1) * step;
	const golden = (Math.sqrt(5) - 1) / 2;
	let left = high - golden * (high - low);
	let right = low + golden * (high - low);
	let [atLeft, atRight] = [at(left), at(right)];
	// 40 steps narrow it to a billionth; around a flat top rounding leaves no more than that anyway.
	for (let i = 0; i < 40; i += 1) {
		if (atLeft > atRight) {
			[high, right, atRight] = [right, left, atLeft];
			left = high - golden * (high - low);
			atLeft = at(left);
		} else {
			[low, left, atLeft] = [left, right, atRight];
			right = low + golden * (high - low);
			atRight = at(right);
		}
	}
	const top = (low + high) / 2;
	const size = at(top);
	if (decibels(size) - decibels(bestLowest) < peakRiseDb) return null;
	return { hz: Math.exp(top), db: decibels(size) };
}

/** Resonance of L with a capacitance alone: 1/(2π√(LC)). Both above zero. */
export const resonanceHz = (inductanceH: number, farad: number): number =>
	sound(1 / (2 * Math.PI * Math.sqrt(inductanceH * farad)));

/**
 * L and self-capacitance from the resonances with two known capacitors added:
 * L = (1/f2² − 1/f1²)/(4π²(C2 − C1)), Cs = 1/(4π²f1²L) − C1. Refused where the larger capacitor did not ring lower, and
 * where what is left for the coil is less than nothing (`coilF`).
 */
export function fromTwoCapacitors(
	first: { addedF: number; hz: number },
	second: { addedF: number; hz: number }
): Result<{ inductanceH: number; coilF: number }> {
	const [small, large] = first.addedF <= second.addedF ? [first, second] : [second, first];
	const refused = outside([
		['small.addedF', small.addedF, 0, 1e-6],
		['large.addedF', large.addedF, small.addedF + 1e-13, 1e-6],
		['large.hz', large.hz, 1, 1e7],
		['small.hz', small.hz, large.hz * (1 + 1e-9), 1e7]
	]);
	if (refused) return refused;
	const inductanceH = (1 / large.hz ** 2 - 1 / small.hz ** 2) / (4 * Math.PI ** 2 * (large.addedF - small.addedF));
	const coilF = 1 / (4 * Math.PI ** 2 * small.hz ** 2 * inductanceH) - small.addedF;
	return outside([['coilF', coilF, 0, 1e-6]]) ?? ok({ inductanceH, coilF });
}

/** The part of its track at which an audio pot's two straight pieces meet: 10 to 15 % at half a turn, common practice. */
const audioAtHalf = 0.12;

/** Part of a pot's track below the wiper at a dial position of 0 to 10; positions beyond are the ends. */
export function trackAt(dial: number, taper: 'linear' | 'audio'): number {
	const x = sound(Math.min(10, Math.max(0, dial))) / 10;
	if (taper === 'linear') return x;
	return x <= 0.5 ? 2 * audioAtHalf * x : audioAtHalf + (2 * x - 1) * (1 - audioAtHalf);
}

/** Hertz of a note by equal temperament, A4 = 440 Hz (ISO 16). @param midi 69 is A4 */
export const noteHz = (midi: number): number => sound(440 * 2 ** ((midi - 69) / 12));

/** The E of each octave from the lowest string up, as marks over an axis in hertz. */
export const eNotes: readonly { name: string; hz: number }[] = [2, 3, 4, 5, 6, 7, 8].map((octave) => ({
	name: `E${octave}`,
	hz: noteHz(12 * (octave + 1) + 4)
}));
