import { judge } from '../coil/band.ts';
import { calibrate, keptRefused, type Calibration, type KeptCoil } from '../coil/calibrate.ts';
import { airInductanceH, permeabilityFrom } from '../coil/inductance.ts';
import { coverage } from '../coil/measurement.ts';
import { modelOhm } from '../coil/model.ts';
import { windCoil, packingFromWidth } from '../coil/winding.ts';
import { specLimits, type SpecContent, type SpecWire } from './content.ts';
import { specModel, usualTemperatureC } from './model.ts';

/** What coils that were wound on the same bobbin from the same spool, and measured, say about the next. SI. */

/** One kept coil with the newest of each kind of its readings. */
export interface KeptReading {
	runId: string;
	sticker: string;
	name: string;
	/** On the bobbin. */
	turns: number;
	/** ISO 8601, UTC. */
	endedAt: string;
	/** Of the spec it came from; null: wound without one. */
	specRevisionNo: number | null;
	/** As its own spec's revision says it. */
	bobbin: { name: string; straightM: number; endDiameterM: number; traverseM: number };
	/** Reading of resistance brought to 20 °C; null: none, or beyond every range of the meter (`open`). */
	ohmAt20C: number | null;
	/** The meter showed more than its widest range. */
	open: boolean;
	/** Its standard uncertainty, and the part that all readings with the same meter share. */
	uncertaintyOhm: number;
	meterOhm: number;
	outerWidthM: number | null;
	/** How far that width may be off either way. */
	outerWidthHalfWidthM: number;
	inductanceH: number | null;
}

export type LeftOutWhy =
	| 'no-resistance'
	| 'open-or-short'
	/** Its bobbin of the same name has other figures. */
	| 'other-figures'
	/** Further from the model than wire and bobbin explain. */
	| 'too-far'
	/** Further from the other coils than coils of one bobbin and spool differ. */
	| 'far-from-rest'
	/** Its reading is worth less than a fifth of itself. */
	| 'too-unsure'
	/** The spec's own figures cannot be reckoned with. */
	| 'spec-refused';

/** After the coil's name and a colon. */
export const leftOutWords: Record<LeftOutWhy, string> = {
	'no-resistance': 'no resistance was measured before assembly',
	'open-or-short': 'it is open or shorted',
	'other-figures': 'its bobbin of this name has other figures',
	'too-far': 'it is further off than wire and bobbin explain',
	'far-from-rest': 'it reads far from the rest; some of its turns may be shorted, or its count or reading wrong',
	'too-unsure': 'its reading is too unsure to learn from',
	'spec-refused': 'this spec’s figures cannot be reckoned with'
};

export interface KeptSay {
	/** null: no coil to learn from. */
	calibration: Calibration | null;
	/** In the order of `calibration.kept`; `ratio` is measured over modelled, the shares add up to one. */
	used: { runId: string; sticker: string; turns: number; ohmAt20C: number; ratio: number; share: number }[];
	leftOut: { runId: string; sticker: string; why: LeftOutWhy }[];
	/** Fitted from outer widths; null: nobody measured one. */
	packing: { value: number; halfWidth: number; coils: number } | null;
	/** Effective permeability fitted from inductances; null: nobody measured one with its iron in place. */
	permeability: { value: number; coils: number } | null;
}

/** Core figures of one bobbin name may differ by this part: a file and a caliper; beyond it is another bobbin. No source. */
export const figuresApartMax = 0.05;

/**
 * A coil further from the middle of all than this part, and what its own reading may be off, teaches nothing: coils wound
 * alike differ by half to one in a hundred, so that honest scatter stays well within and widens the band. No source.
 */
export const apartFromRestMax = 0.05;
/** Of two that disagree nobody can say which is wrong. */
const restCoilsMin = 3;

/** However well widths agree, the next coil of the same hands is packed this much differently. Common practice, no source. */
export const packingHalfWidthMin = 0.02;

/**
 * Below this a coil was measured before its iron was in: half way from none to the least that rods, slugs or screws come to
 * in the table of cores.
 */
export const ironPermeabilityMin = 1.15;

/**
 * The calibration that kept coils give a spec, coil by coil, with those left out and why; and what their widths and
 * inductances say about packing and cores.
 *
 * @param spoolWire the spool's wire in place of the spec's
 */
export function calibrationOf(content: SpecContent, spoolWire: SpecWire | null, kept: readonly KeptReading[]): KeptSay {
	const model = specModel(content, spoolWire);
	const say = resistanceSay(content, spoolWire, kept);
	// Shorted turns or a wrong count tell in a width and an inductance as well.
	const wrong = say.leftOut.filter(({ why }) => why === 'too-far' || why === 'far-from-rest');
	const sound = kept.filter(({ runId }) => !wrong.some((coil) => coil.runId === runId));
	return {
		...say,
		packing: fittedPacking(content, model, sound),
		permeability: fittedPermeability(content, model, sound)
	};
}

export type ResistanceSay = Pick<KeptSay, 'calibration' | 'used' | 'leftOut'>;

/** The part of `calibrationOf` that resistances have to say. */
export const resistanceSay = (
	content: SpecContent,
	spoolWire: SpecWire | null,
	kept: readonly KeptReading[]
): ResistanceSay => resistanceSays(content, spoolWire, kept)(null);

/**
 * The same for many coils that ask: each is told what the others say, for no coil speaks for itself. The kept coils are
 * looked at once.
 *
 * @returns what all but one coil say, by its run; null: all of them
 */
export function resistanceSays(
	content: SpecContent,
	spoolWire: SpecWire | null,
	kept: readonly KeptReading[]
): (exceptRunId: string | null) => ResistanceSay {
	const model = specModel(content, spoolWire);
	const candidates: Candidate[] = [];
	const unusable: KeptSay['leftOut'] = [];
	for (const reading of kept) {
		const judged = usableCoil(model, content, reading);
		if (typeof judged === 'string') unusable.push(leftOutFor(reading, judged));
		else candidates.push({ reading, ...judged });
	}
	return (exceptRunId) =>
		sayOf(
			model,
			candidates.filter(({ reading }) => reading.runId !== exceptRunId),
			unusable.filter(({ runId }) => runId !== exceptRunId)
		);
}

const leftOutFor = ({ runId, sticker }: KeptReading, why: LeftOutWhy) => ({ runId, sticker, why });

function sayOf(model: Model, candidates: readonly Candidate[], unusable: KeptSay['leftOut']): ResistanceSay {
	const far = farFromRest(candidates);
	const used = candidates.filter((candidate) => !far.includes(candidate));
	// Each went through by itself, so all of them do.
	const fitted =
		used.length > 0
			? calibrate(
					model,
					used.map(({ coil }) => coil)
				)
			: null;
	const calibration = fitted?.ok ? fitted.value : null;
	return {
		calibration,
		used: used.flatMap(({ reading, coil }, i) => {
			const part = calibration?.coils[i];
			if (!part) return [];
			const { runId, sticker, turns } = reading;
			return [{ runId, sticker, turns, ohmAt20C: coil.ohmAt20C, ...part }];
		}),
		leftOut: [...unusable, ...far.map(({ reading }) => leftOutFor(reading, 'far-from-rest'))]
	};
}

type Model = ReturnType<typeof specModel>;

interface Candidate {
	reading: KeptReading;
	coil: KeptCoil;
	/** Measured over modelled. */
	ratio: number;
}

/** Those that most of the others contradict; none where that would be half of them or more. */
function farFromRest(candidates: readonly Candidate[]): readonly Candidate[] {
	if (candidates.length < restCoilsMin) return [];
	const middle = median(candidates.map(({ ratio }) => ratio));
	const far = candidates.filter(({ ratio, coil }) => {
		const own = (coverage * coil.uncertaintyOhm) / coil.ohmAt20C;
		return Math.abs(ratio / middle - 1) > apartFromRestMax + own;
	});
	return 2 * far.length < candidates.length ? far : [];
}

function median(values: readonly number[]): number {
	const sorted = values.toSorted((a, b) => a - b);
	const half = sorted.length / 2;
	return (sorted[Math.ceil(half) - 1]! + sorted[Math.floor(half)]!) / 2;
}

function usableCoil(
	model: Model,
	content: SpecContent,
	reading: KeptReading
): { coil: KeptCoil; ratio: number } | LeftOutWhy {
	if (!sameFigures(content, reading)) return 'other-figures';
	if (reading.open) return 'open-or-short';
	if (reading.ohmAt20C === null) return 'no-resistance';
	const { turns, ohmAt20C, uncertaintyOhm, meterOhm } = reading;
	const refused = windCoil({ ...model, turns, temperatureC: usualTemperatureC });
	if (!refused.ok) return refused.field === 'turns' ? 'too-far' : 'spec-refused';
	const modelled = modelOhm(model, [turns], 'single', usualTemperatureC);
	// Open and short are many times off: how sure the model is does not matter.
	const verdict = judge({ ohm: ohmAt20C, uncertaintyOhm }, { ohm: modelled, uncertaintyOhm: 0 });
	if (!verdict.ok) return 'spec-refused';
	if (verdict.value.agreement === 'open' || verdict.value.agreement === 'short') return 'open-or-short';
	const coil: KeptCoil = { turns: [turns], connection: 'single', ohmAt20C, uncertaintyOhm, meterOhm };
	const unfit = keptRefused(model, [coil]);
	if (!unfit) return { coil, ratio: ohmAt20C / modelled };
	if (unfit.field.endsWith('.ohmAt20C')) return 'too-far';
	return unfit.field.startsWith('kept') ? 'too-unsure' : 'spec-refused';
}

/** The bobbin of the coil and the spec's are one as far as a core can be measured. */
function sameFigures({ bobbin }: SpecContent, { bobbin: other }: KeptReading): boolean {
	const near = (a: number, b: number) => Math.abs(a - b) <= figuresApartMax * Math.max(a, b);
	return (
		near(bobbin.straightM, other.straightM) &&
		near(bobbin.endDiameterM, other.endDiameterM) &&
		near(bobbin.traverseM, other.traverseM)
	);
}

function fittedPacking(content: SpecContent, model: Model, kept: readonly KeptReading[]): KeptSay['packing'] {
	const fits: { value: number; own: number }[] = [];
	for (const reading of kept) {
		if (reading.outerWidthM === null || !sameFigures(content, reading)) continue;
		const fit = packingFromWidth(
			{ ...model, turns: reading.turns, temperatureC: usualTemperatureC },
			reading.outerWidthM
		);
		if (!fit.ok) continue;
		const depthM = (reading.outerWidthM - model.bobbin.endDiameterM) / 2;
		// Packing goes as one over the depth, and the width holds the depth twice.
		fits.push({ value: fit.value, own: (fit.value * reading.outerWidthHalfWidthM) / 2 / depthM });
	}
	const n = fits.length;
	if (n === 0) return null;
	const value = fits.reduce((sum, fit) => sum + fit.value, 0) / n;
	const own = fits.reduce((sum, fit) => sum + fit.own, 0) / n;
	const variance = n > 1 ? fits.reduce((sum, fit) => sum + (fit.value - value) ** 2, 0) / (n - 1) : 0;
	// The half-width whose rectangle spreads like the coils do (JCGM 100, 4.3.7); one caliper's error does not average out.
	const halfWidth = Math.max(packingHalfWidthMin, Math.hypot(Math.sqrt(3 * variance), own));
	return { value, halfWidth: Math.min(halfWidth, specLimits.packingHalfWidth[1]), coils: n };
}

function fittedPermeability(content: SpecContent, model: Model, kept: readonly KeptReading[]): KeptSay['permeability'] {
	const least = content.cores.key === 'air' ? 0 : ironPermeabilityMin;
	const fits: number[] = [];
	for (const reading of kept) {
		if (reading.inductanceH === null || !sameFigures(content, reading)) continue;
		const wound = windCoil({ ...model, turns: reading.turns, temperatureC: usualTemperatureC });
		if (!wound.ok) continue;
		const { straightM, endDiameterM, traverseM } = model.bobbin;
		const window = { straightM, endDiameterM, traverseM, windingDepthM: wound.value.windingDepthM };
		const air = airInductanceH(window, reading.turns);
		const fit = air.ok ? permeabilityFrom(reading.inductanceH, air.value) : air;
		if (fit.ok && fit.value >= least) fits.push(fit.value);
	}
	return fits.length > 0 ? { value: fits.reduce((sum, fit) => sum + fit, 0) / fits.length, coils: fits.length } : null;
}
