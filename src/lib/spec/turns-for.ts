import { scaleAt, type Calibration } from '../coil/calibrate.ts';
import { turnsMax } from '../coil/limits.ts';
import { modelOhm } from '../coil/model.ts';
import type { Connection } from '../coil/pickup.ts';
import type { Prediction } from '../coil/predict.ts';
import { ok, outside, type Result } from '../coil/refuse.ts';
import { coilRefused, turnsForFullBobbin, windCoil, type CoilInput } from '../coil/winding.ts';
import { copperKgPerM } from '../coil/wire.ts';
import type { UnitPreference } from '../coil/units.ts';
import type { SpecContent, SpecWire } from './content.ts';
import { predictSpec, specModel, usualTemperatureC } from './model.ts';
import { plusMinus } from './words.ts';

/** The way back: turns for what is wanted. Two coils keep the difference they have in the spec. */

export type Wanted =
	/** As wired, at 20 °C. */
	| { kind: 'resistance'; ohm: number }
	/** Less a margin on each side. */
	| { kind: 'full'; marginM: number }
	/** All the wire there is, for all coils together: the copper's mass, or its length. */
	| { kind: 'mass'; copperKg: number }
	| { kind: 'length'; lengthM: number };

/** The spec with other turns. */
export const withTurns = (content: SpecContent, turns: readonly number[]): SpecContent => ({
	...content,
	coils: content.coils.map((coil, i) => ({ ...coil, turns: turns[i] ?? coil.turns }))
});

/** Whole turns of every coil when the first has `first`, at the differences of the spec. */
function keepingDifference(content: SpecContent, first: number): number[] {
	const own = content.coils[0]!.turns;
	return content.coils.map((coil) => first + coil.turns - own);
}

/** A real number of the first coil's turns at which a figure that rises with them reaches what is wanted. */
function solve(figure: (first: number) => number, wanted: number, least: number, most: number): number {
	let low = least;
	let high = most;
	// Halved until a step is far below a turn: 100,000 turns need 37 for a millionth.
	for (let i = 0; i < 60; i++) {
		const middle = (low + high) / 2;
		if (figure(middle) < wanted) low = middle;
		else high = middle;
	}
	return (low + high) / 2;
}

/**
 * Turns of each coil for what is wanted. Resistance is what these coils will measure: where kept coils say that the model is
 * off by so much, the turns follow them.
 *
 * @returns whole turns, nearest for a resistance, and never more than there is room or wire for otherwise
 */
export function turnsFor(
	content: SpecContent,
	wire: SpecWire,
	calibration: Calibration | null,
	wanted: Wanted
): Result<number[]> {
	const model = specModel(content, wire);
	const input: Omit<CoilInput, 'turns'> = { ...model, temperatureC: usualTemperatureC };
	const refused = coilRefused({ ...input, turns: 1 });
	if (refused) return refused;
	const connection: Connection = content.coils.length === 2 ? content.wiring : 'single';
	const own = content.coils[0]!.turns;
	const differences = content.coils.map((coil) => coil.turns - own);
	// No coil below one turn, none deeper than any pickup's.
	const least = 1 - Math.min(0, ...differences);
	const deepest = coilRefused({ ...input, turns: turnsMax });
	const most = Math.floor(deepest?.field === 'turns' ? deepest.max : turnsMax) - Math.max(0, ...differences);
	if (most < least) return outside([['turns', NaN, 1, turnsMax]])!;
	const turnsAt = (first: number) => keepingDifference(content, first);

	switch (wanted.kind) {
		case 'resistance': {
			const scale = calibration ? scaleAt(calibration, model) : 1;
			const ohmAt = (first: number) => scale * modelOhm(model, turnsAt(first), connection, usualTemperatureC);
			const beyond = outside([['resistanceOhm', wanted.ohm, ohmAt(least), ohmAt(most)]]);
			if (beyond) return beyond;
			return ok(turnsAt(Math.round(solve(ohmAt, wanted.ohm, least, most))));
		}
		case 'full': {
			const full = turnsForFullBobbin(input, wanted.marginM);
			if (!full.ok) return full;
			// The coil with most turns is the one that fills.
			const first = Math.floor(full.value + 1e-9) - Math.max(0, ...differences);
			const beyond = outside([['turns', first, least, most]]);
			return beyond ?? ok(turnsAt(first));
		}
		case 'mass':
		case 'length': {
			const perM = wanted.kind === 'mass' ? copperKgPerM(model.wire.diameterM) : 1;
			const amountAt = (first: number) => {
				let lengthM = 0;
				for (const turns of turnsAt(first)) {
					const coil = windCoil({ ...input, turns });
					if (coil.ok) lengthM += coil.value.lengthM;
				}
				return lengthM * perM;
			};
			const [field, amount] =
				wanted.kind === 'mass' ? (['copperKg', wanted.copperKg] as const) : (['lengthM', wanted.lengthM] as const);
			const beyond = outside([[field, amount, amountAt(least), amountAt(most)]]);
			if (beyond) return beyond;
			return ok(turnsAt(Math.max(least, Math.floor(solve(amountAt, amount, least, most) + 1e-6))));
		}
	}
}

export interface Answer {
	turns: number[];
	/** The spec with these turns. */
	content: SpecContent;
	/** What it would measure; refused where two coils would stand in one another. */
	prediction: Result<Prediction>;
}

export function answerFor(
	content: SpecContent,
	wire: SpecWire,
	calibration: Calibration | null,
	wanted: Wanted
): Result<Answer> {
	const turns = turnsFor(content, wire, calibration, wanted);
	if (!turns.ok) return turns;
	const changed = withTurns(content, turns.value);
	return ok({ turns: turns.value, content: changed, prediction: predictSpec(changed, { wire, calibration }) });
}

/** What so many turns more (or, negative, fewer) on every coil change. */
export interface Change {
	turns: number;
	ohm: { value: number; uncertainty: number };
	/** Of the winding depth, which is what the flange loses. */
	depth: { value: number; uncertainty: number };
	/** There is a flange to lose room to. */
	flange: boolean;
	/** null where there is no peak before or after. */
	hertz: { value: number; uncertainty: number } | null;
}

/**
 * Differences carry the relative uncertainty of the figure they are a difference of: what makes the whole unsure makes its
 * growth unsure in proportion.
 *
 * @param now the prediction for `content` where somebody has it already
 */
export function turnsMore(
	content: SpecContent,
	wire: SpecWire,
	calibration: Calibration | null,
	more: number,
	now: Result<Prediction> = predictSpec(content, { wire, calibration })
): Result<Change> {
	if (!now.ok) return now;
	const then = predictSpec(
		withTurns(
			content,
			content.coils.map((coil) => coil.turns + more)
		),
		{ wire, calibration }
	);
	if (!then.ok) return then;
	const between = (a: { value: number }, b: { value: number; uncertainty: number }) => {
		const value = b.value - a.value;
		return { value, uncertainty: b.value === 0 ? 0 : Math.abs((value * b.uncertainty) / b.value) };
	};
	const before = now.value;
	const after = then.value;
	return ok({
		turns: more,
		ohm: between(before.figures.resistanceOhm, after.figures.resistanceOhm),
		depth: between(before.figures.windingDepthM, after.figures.windingDepthM),
		flange: content.bobbin.flangeOuterM !== null,
		hertz: before.peakHz && after.peakHz ? between(before.peakHz, after.peakHz) : null
	});
}

/** "+0.33 kΩ ± 0.03, 0.20 mm ± 0.05 less room to the flange, peak 100 Hz ± 20 lower". */
export function changeText({ ohm, depth, flange, hertz }: Change, units: UnitPreference): string {
	const said = [
		signed(
			plusMinus(
				ohm.value,
				ohm.uncertainty,
				'resistance',
				Math.abs(ohm.value) < 1000 && units.resistance === 'kilohm' ? 'ohm' : units.resistance
			).text
		),
		`${plusMinus(Math.abs(depth.value), depth.uncertainty, 'length', units.length).text} ${
			flange ? `${depth.value < 0 ? 'more' : 'less'} room to the flange` : depth.value < 0 ? 'less deep' : 'deeper'
		}`
	];
	if (hertz) {
		const shown = plusMinus(Math.abs(hertz.value), hertz.uncertainty, 'frequency', 'hertz').text;
		said.push(`the peak ${shown} ${hertz.value < 0 ? 'lower' : 'higher'}`);
	}
	// A figure does not leave its unit at the end of a line.
	return said.map((text) => text.replace(/(?<=[\d±]) (?=[±\dΩkmiH])/g, '\u00a0')).join(', ');
}

const signed = (text: string): string => (/^[−0]/.test(text) && !/^0\.\d*[1-9]/.test(text) ? text : `+${text}`);

/** "200", "-1,000", "−50 turns": a whole number of turns, less than none too; null where it is none. */
export function typedChange(text: string): number | null {
	const found = /^([-−–+]?)\s*(\d{1,3}(?:[ ,.']\d{3})+|\d{1,6})\s*(?:turns?)?$/i.exec(text.normalize('NFKC').trim());
	if (!found) return null;
	const size = Number(found[2]!.replace(/\D/g, ''));
	if (size > turnsMax) return null;
	return found[1] && found[1] !== '+' ? (size === 0 ? 0 : -size) : size;
}

/** Density of enamels, in kg/m³: about 1,300 (from memory; they lie close together). */
const enamelKgPerM3 = 1300;

/** Enamel's part of the weight of wire: what to take off a spool's weight besides the reel. */
export function enamelPart(wire: Pick<SpecWire, 'diameterM' | 'overallDiameterM'>): number {
	const copper = copperKgPerM(wire.diameterM);
	const enamel = (Math.PI / 4) * (wire.overallDiameterM ** 2 - wire.diameterM ** 2) * enamelKgPerM3;
	return enamel / (copper + enamel);
}
