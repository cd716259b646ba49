import { scaleAt, scatterPrior, type Calibration } from './calibrate.ts';
import { airInductanceH, inductanceRatio, mutualBesideH, type Window } from './inductance.ts';
import { turnsMax, within } from './limits.ts';
import {
	atValues,
	halfWidthsOf,
	halfWidthsRefused,
	modelOhm,
	windingInputCount,
	windingInputs,
	type CoilModel,
	type WindingInput
} from './model.ts';
import { joinedHenry, joinedOhm, type Connection } from './pickup.ts';
import { ok, outside, type Refused, type Result } from './refuse.ts';
import { coilCapacitanceF, findPeak, loadRefused, type Load } from './response.ts';
import { propagate, type Input, type Uncertain } from './uncertainty.ts';
import { coilRefused, woundCoil, type Coil } from './winding.ts';

/** Everything the computation says about one pickup before any wire is spent. SI. */
export interface PredictionInput extends CoilModel {
	/** Of one coil, or of two side by side on bobbins of the same kind. */
	turns: readonly number[];
	connection: Connection;
	temperatureC: number;
	/** What iron and magnets multiply the inductance by; null: no iron. */
	effectivePermeability: number | null;
	/** What it plays into, `coilF` null where nobody measured it; null: no response asked for. */
	load: (Omit<Load, 'coilF'> & { coilF: number | null }) | null;
	/** Between the middles of two coils; null: side by side with hardly a gap. */
	spacingM?: number | null;
	/** Two coils are wired against hum, so that their fields aid one another. */
	humCancelling?: boolean;
	calibration?: Calibration | null;
}

/** What a figure's uncertainty comes from. */
export type Contribution =
	WindingInput | 'temperature' | 'calibration' | 'scatter' | 'air' | 'permeability' | 'coilCapacitance' | 'losses';

export type Figure =
	| 'resistanceOhm'
	| 'lengthM'
	| 'copperMassKg'
	| 'meanTurnM'
	| 'windingDepthM'
	| 'outerLengthM'
	| 'outerWidthM'
	| 'copperFill'
	| 'airInductanceH'
	| 'inductanceH';

export interface Prediction {
	/** Lengths and masses are totals, geometry is the first coil's, resistance and inductance are as joined. */
	figures: Record<Figure, Uncertain<Contribution>>;
	/** null: no load, or no peak with the pots as they stand. Decibels over the string's voltage. */
	peakHz: Uncertain<Contribution> | null;
	peakDb: Uncertain<Contribution> | null;
	/** Each coil by itself, calibration and all. */
	coils: (Coil & { resistanceUncertaintyOhm: number; airInductanceH: number; inductanceH: number })[];
	/** Of two coils as wired, without iron; 0 for one. */
	mutualAirH: number;
	/** The self-capacitance reckoned with; null without a load. */
	coilF: number | null;
}

/** Enamel, tape and wax between two coils that nobody has measured. */
const gapM = 0.0015;

function predictionRefused(input: PredictionInput): Refused | null {
	const { turns } = input;
	const shape = outside([['turns.length', turns.length, 1, 2]]);
	if (shape) return shape;
	for (const [i, count] of turns.entries()) {
		const bad = coilRefused({ ...input, turns: count }) ?? outside([['turns', count, 1, turnsMax]]);
		if (bad) return bad.field === 'turns' ? { ...bad, field: `turns[${i}]`, min: 1 } : bad;
	}
	return (
		halfWidthsRefused(input) ??
		outside([within('effectivePermeability', input.effectivePermeability ?? 1)]) ??
		(input.load && loadRefused({ ...input.load, coilF: input.load.coilF ?? 0 }))
	);
}

const windowOf = (model: CoilModel, coil: Coil): Window => ({
	straightM: model.bobbin.straightM,
	endDiameterM: model.bobbin.endDiameterM,
	windingDepthM: coil.windingDepthM,
	traverseM: model.bobbin.traverseM
});

/**
 * Self-capacitance of a pickup nobody has measured, by its packing. Two in series count as one: what joining them halves
 * the wiring between them and the plate below make up again (from memory).
 */
const pickupCoilF = (packing: number, count: number, connection: Connection): number =>
	coilCapacitanceF(packing) * (connection === 'parallel' ? count : 1);

/** What a resistance depends on, with uncertainties; `resistanceAt` takes their values in this order. */
function resistanceInputs(input: PredictionInput): Input<Contribution>[] {
	const calibration = input.calibration ?? null;
	return [
		...windingInputs(input),
		{
			name: 'temperature',
			value: input.temperatureC,
			uncertainty: halfWidthsOf(input).temperatureC / Math.sqrt(3)
		},
		{
			name: 'calibration',
			value: 1,
			uncertainty: calibration ? calibration.keptUncertainty * calibration.keptShare : 0
		},
		{ name: 'scatter', value: 1, uncertainty: calibration?.scatter ?? scatterPrior }
	];
}

/** The model, its temperature and the scale over its resistances, at other values of the inputs. */
function resistanceAt(input: PredictionInput, values: readonly number[]) {
	const { calibration } = input;
	const model = atValues(input, values);
	const [celsius = 20, calibrated = 1, scattered = 1] = values.slice(windingInputCount);
	return { model, celsius, scale: (calibration ? scaleAt(calibration, model) : 1) * calibrated * scattered };
}

/**
 * The resistance of `predict` without the rest of it, which takes a hundred times as long: for lists, and for coils that
 * are wound. Coils joined as they are.
 */
export function predictResistance(
	input: Omit<PredictionInput, 'effectivePermeability' | 'load'>
): Result<Uncertain<Contribution>> {
	const whole: PredictionInput = { ...input, effectivePermeability: null, load: null };
	const refused = predictionRefused(whole);
	if (refused) return refused;
	const { ohm } = propagate(resistanceInputs(whole), (values) => {
		const { model, celsius, scale } = resistanceAt(whole, values);
		const ohms = whole.turns.map((count) => modelOhm(model, [count], 'single', celsius) * scale);
		return { ohm: joinedOhm(ohms, whole.connection) };
	});
	// A resistance is there at any values.
	return ok(ohm!);
}

/** The whole prediction, each figure with its standard uncertainty and what that comes from. */
export function predict(input: PredictionInput): Result<Prediction> {
	const refused = predictionRefused(input);
	if (refused) return refused;
	const { turns, connection, temperatureC, load } = input;
	const half = halfWidthsOf(input);
	const third = Math.sqrt(3);

	const wind = (model: CoilModel, celsius: number): Coil[] =>
		turns.map((count) =>
			woundCoil({
				bobbin: model.bobbin,
				wire: model.wire,
				packing: model.packing,
				turns: count,
				temperatureC: celsius
			})
		);
	const coils = wind(input, temperatureC);
	const wound = coils.map((coil) => ({ window: windowOf(input, coil), turns: coil.turns }));
	const air: number[] = [];
	for (const { window, turns: count } of wound) {
		const full = airInductanceH(window, count);
		if (!full.ok) return full;
		air.push(full.value);
	}
	let mutualAirH = 0;
	const [first, second] = wound;
	if (first && second && connection !== 'single') {
		const touching = first.window.endDiameterM + first.window.windingDepthM + second.window.windingDepthM;
		const beside = mutualBesideH(first, second, input.spacingM ?? touching + gapM);
		if (!beside.ok) return beside;
		// In one sense the field of each goes back through the other; wired against hum it comes out adding.
		mutualAirH = (input.humCancelling ?? true) ? -beside.value : beside.value;
	}
	const coupling = mutualAirH === 0 ? 0 : mutualAirH / Math.sqrt(air[0]! * air[1]!);

	const resistanceNames = resistanceInputs(input);
	const rest: Input<Contribution>[] = [
		{ name: 'air', value: 1, uncertainty: half.airPart / third },
		{
			name: 'permeability',
			value: input.effectivePermeability ?? 1,
			uncertainty:
				input.effectivePermeability === null || input.effectivePermeability === 1
					? 0
					: (input.effectivePermeability * half.permeabilityPart) / third
		},
		{ name: 'coilCapacitance', value: 1, uncertainty: load ? half.coilCapacitancePart / third : 0 },
		{ name: 'losses', value: 0, uncertainty: load ? half.lossesDb / third : 0 }
	];
	const inputs = [...resistanceNames, ...rest];

	const figures = (values: readonly number[]) => {
		const { model, celsius, scale } = resistanceAt(input, values);
		const [evenness = 1, permeability = 1, capacitance = 1, losses = 0] = values.slice(resistanceNames.length);
		const now = wind(model, celsius);
		const henries = now.map((coil, i) => {
			const moved = inductanceRatio(wound[i]!.window, windowOf(model, coil));
			return evenness * air[i]! * (moved.ok ? moved.value : 1);
		});
		const ohms = now.map((coil) => coil.resistanceOhm * scale);
		const resistanceOhm = joinedOhm(ohms, connection);
		const between = coupling * Math.sqrt(henries[0]! * (henries[1] ?? 0));
		const joinedAirH = joinedHenry(henries, connection, between);
		const inductanceH = permeability * joinedAirH;
		const coilF = load && capacitance * (load.coilF ?? pickupCoilF(model.packing, turns.length, connection));
		const peak = load && findPeak({ ...load, inductanceH, resistanceOhm, coilF: coilF ?? 0 });
		const one = now[0]!;
		return {
			resistanceOhm,
			lengthM: now.reduce((sum, coil) => sum + coil.lengthM, 0),
			copperMassKg: now.reduce((sum, coil) => sum + coil.copperMassKg, 0),
			meanTurnM: one.meanTurnM,
			windingDepthM: one.windingDepthM,
			outerLengthM: one.outerLengthM,
			outerWidthM: one.outerWidthM,
			copperFill: one.copperFill,
			airInductanceH: joinedAirH,
			inductanceH,
			peakHz: peak ? peak.hz : null,
			peakDb: peak ? peak.db + losses : null,
			first: ohms[0]!,
			second: ohms[1] ?? 0
		};
	};

	const { peakHz, peakDb, first: firstOhm, second: secondOhm, ...sure } = propagate(inputs, figures);
	const each = [firstOhm, secondOhm];
	return ok({
		// None of these is ever null: only the peak may be.
		figures: sure as Record<Figure, Uncertain<Contribution>>,
		peakHz,
		peakDb,
		coils: coils.map((coil, i) => ({
			...coil,
			resistanceOhm: each[i]?.value ?? coil.resistanceOhm,
			resistanceUncertaintyOhm: each[i]?.uncertainty ?? 0,
			ohmPerTurn: (coil.ohmPerTurn * (each[i]?.value ?? coil.resistanceOhm)) / coil.resistanceOhm,
			airInductanceH: air[i]!,
			inductanceH: air[i]! * (input.effectivePermeability ?? 1)
		})),
		mutualAirH,
		coilF: load && (load.coilF ?? pickupCoilF(input.packing, turns.length, connection))
	});
}
