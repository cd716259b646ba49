import { z } from 'zod';
import { limits, type LimitedField } from './limits.ts';
import { predict, type Contribution, type PredictionInput } from './predict.ts';
import { ok, outside, type Result } from './refuse.ts';
import { awgDiameterM, awgTableDiameterM, awgTableInch } from './wire.ts';

/** A request for a prediction and its answer, as programs exchange them. SI, units named in the keys. */

const number = (field: LimitedField, says: string) =>
	z.number().min(limits[field][0]).max(limits[field][1]).describe(says);

export const predictionRequest = z
	.strictObject({
		bobbin: z.strictObject({
			straightM: number('bobbin.straightM', 'straight length of the racetrack core; 0 is a round core'),
			endDiameterM: number('bobbin.endDiameterM', 'width of the core, the diameter of its half circles'),
			traverseM: number('bobbin.traverseM', 'between the flanges'),
			flangeOuterM: number('bobbin.flangeOuterM', 'width of the flange over all').optional()
		}),
		wire: z
			.strictObject({
				awg: number('wire.awg', 'gauge of the bare wire; or else diameterM').optional(),
				diameterM: number('wire.diameterM', 'bare conductor; or else awg').optional(),

				diameterBasis: z
					.enum(['law', 'table'])
					.default('law')
					.describe(
						'how a gauge becomes a diameter: the exact law of AWG, or the rounded inch sizes of winding-wire tables'
					),
				overallDiameterM: number('wire.overallDiameterM', 'over the enamel'),
				ohmPerM: number(
					'wire.ohmPerM',
					'measured on this spool at 20 °C, in place of what the diameter gives'
				).optional()
			})
			.refine((wire) => (wire.awg === undefined) !== (wire.diameterM === undefined), {
				path: ['awg'],
				message: 'Give either awg or diameterM.'
			}),
		packing: number('packing', 'part of the window that is wire, one square per turn; 0.7 to 0.9 wound by hand'),
		turns: z.array(z.number().min(1).max(limits.turns[1])).min(1).max(2).describe('one number per coil'),
		connection: z.enum(['series', 'parallel', 'single']).describe('single: the first coil alone'),
		temperatureC: number('temperatureC', 'temperature of the coil, °C'),
		load: z
			.strictObject({
				volumePotOhm: number('load.volumePotOhm', 'whole track'),
				volume: number('load.volume', 'part of the track below the wiper: 1 full up'),
				tonePotOhm: number('load.tonePotOhm', 'whole track; left out: no tone control').optional(),
				toneCapF: number('load.toneCapF', 'in series with the tone control').default(22e-9),
				tone: number('load.tone', 'part of the track in series with the capacitor: 1 full up').default(1),
				cableF: number('load.cableF', 'on the wiper'),
				inputOhm: number('load.inputOhm', 'on the wiper'),
				coilF: number('load.coilF', 'self-capacitance of the pickup'),
				lossOhm: number('load.lossOhm', 'losses as a resistance across the inductance; left out: none').optional()
			})
			.optional(),
		effectivePermeability: number(
			'effectivePermeability',
			'what iron and magnets multiply the inductance by; left out: no iron'
		).optional()
	})
	.describe('What to predict; SI units');

export type PredictionRequest = z.infer<typeof predictionRequest>;

const contributions: readonly Contribution[] = [
	'diameter',
	'overallDiameter',
	'ohmPerM',
	'packing',
	'bobbin',
	'temperature',
	'calibration',
	'scatter',
	'air',
	'permeability',
	'coilCapacitance',
	'losses'
];

const part = z.strictObject({ name: z.enum(contributions), uncertainty: z.number() });

const geometry = {
	meanTurnM: z.number(),
	windingDepthM: z.number(),
	outerLengthM: z.number(),
	outerWidthM: z.number(),
	copperFill: z.number().describe("copper's part of the window")
};

/** Figures of the answer, each with its standard uncertainty beside it under `uncertainties`. */
const figureKeys = [
	'resistanceOhm',
	'lengthM',
	'copperMassKg',
	'meanTurnM',
	'windingDepthM',
	'outerLengthM',
	'outerWidthM',
	'copperFill',
	'airInductanceH',
	'inductanceH'
] as const;

const uncertain = z.strictObject({
	uncertainty: z.number().describe('standard uncertainty, in the unit of the figure; twice it holds 19 of 20'),
	parts: z.array(part).describe('what each input alone adds, largest first')
});

export const predictionAnswer = z
	.strictObject({
		resistanceOhm: z.number().describe('as joined, at the temperature asked for'),
		resistanceUncertaintyOhm: z.number().describe('standard uncertainty'),
		lengthM: z.number().describe('of all coils'),
		copperMassKg: z.number().describe('of all coils'),
		...geometry,
		airInductanceH: z.number().describe('as joined, without iron'),
		inductanceH: z.number().describe('as joined, with iron; two coils are taken to be wired against hum'),
		peakHz: z.number().nullable().describe('null: no load, or no peak with the pots as they stand'),
		peakDb: z.number().nullable().describe("over the string's voltage"),
		uncertainties: z.strictObject({
			...(Object.fromEntries(figureKeys.map((key) => [key, uncertain])) as Record<
				(typeof figureKeys)[number],
				typeof uncertain
			>),
			peakHz: uncertain.nullable(),
			peakDb: uncertain.nullable()
		}),
		coils: z.array(
			z.strictObject({
				turns: z.number(),
				resistanceOhm: z.number(),
				resistanceUncertaintyOhm: z.number(),
				ohmPerTurn: z.number().describe('what one more turn adds'),
				lengthM: z.number(),
				copperMassKg: z.number(),
				...geometry,
				roomM: z.number().nullable().describe('to the flange on each side, negative: it does not fit; null: no flange'),
				airInductanceH: z.number(),
				inductanceH: z.number()
			})
		)
	})
	.describe('The figures; SI units, geometry of the first coil');

export type PredictionAnswer = z.infer<typeof predictionAnswer>;

/** The input of `predict` that a request that fits the schema means. */
export function predictionInput(request: PredictionRequest): Result<PredictionInput> {
	const { bobbin, wire, load } = request;
	let diameterM = wire.diameterM ?? null;
	if (wire.awg !== undefined) {
		diameterM = wire.diameterBasis === 'law' ? awgDiameterM(wire.awg) : awgTableDiameterM(wire.awg);
	}
	if (diameterM === null) {
		// The only way here is a gauge the table does not hold.
		const held = Object.keys(awgTableInch).map(Number);
		return { ok: false, field: 'wire.awg', min: Math.min(...held), max: Math.max(...held), got: wire.awg ?? null };
	}
	const refused = outside([
		['wire.overallDiameterM', wire.overallDiameterM, diameterM, limits['wire.overallDiameterM'][1]]
	]);
	return (
		refused ??
		ok({
			bobbin: { ...bobbin, flangeOuterM: bobbin.flangeOuterM ?? null },
			wire: { diameterM, overallDiameterM: wire.overallDiameterM, ohmPerM: wire.ohmPerM ?? null },
			packing: request.packing,
			turns: request.turns,
			connection: request.connection,
			temperatureC: request.temperatureC,
			effectivePermeability: request.effectivePermeability ?? null,
			load: load ? { ...load, tonePotOhm: load.tonePotOhm ?? null, lossOhm: load.lossOhm ?? null } : null
		})
	);
}

/** From a request that fits the schema to its answer, or the field that makes no sense beside the others. */
export function answerPrediction(request: PredictionRequest): Result<PredictionAnswer> {
	const input = predictionInput(request);
	if (!input.ok) return input;
	const predicted = predict(input.value);
	if (!predicted.ok) return predicted;
	const { figures, peakHz, peakDb, coils } = predicted.value;
	const values = Object.fromEntries(figureKeys.map((key) => [key, figures[key].value])) as Record<
		(typeof figureKeys)[number],
		number
	>;
	const uncertainties = Object.fromEntries(
		figureKeys.map((key) => [key, { uncertainty: figures[key].uncertainty, parts: figures[key].parts }])
	) as Omit<PredictionAnswer['uncertainties'], 'peakHz' | 'peakDb'>;
	return ok({
		...values,
		resistanceUncertaintyOhm: figures.resistanceOhm.uncertainty,
		peakHz: peakHz?.value ?? null,
		peakDb: peakDb?.value ?? null,
		uncertainties: {
			...uncertainties,
			peakHz: peakHz && { uncertainty: peakHz.uncertainty, parts: peakHz.parts },
			peakDb: peakDb && { uncertainty: peakDb.uncertainty, parts: peakDb.parts }
		},
		coils: coils.map((coil) => ({
			turns: coil.turns,
			resistanceOhm: coil.resistanceOhm,
			resistanceUncertaintyOhm: coil.resistanceUncertaintyOhm,
			ohmPerTurn: coil.ohmPerTurn,
			lengthM: coil.lengthM,
			copperMassKg: coil.copperMassKg,
			meanTurnM: coil.meanTurnM,
			windingDepthM: coil.windingDepthM,
			outerLengthM: coil.outerLengthM,
			outerWidthM: coil.outerWidthM,
			copperFill: coil.copperFill,
			roomM: coil.roomM,
			airInductanceH: coil.airInductanceH,
			inductanceH: coil.inductanceH
		}))
	});
}
