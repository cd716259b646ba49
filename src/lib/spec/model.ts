import type { Calibration } from '../coil/calibrate.ts';
import { inductanceClaims } from '../coil/inductance.ts';
import type { CoilModel, HalfWidths } from '../coil/model.ts';
import { together } from '../coil/pickup.ts';
import {
	predict,
	predictResistance,
	type Contribution,
	type Prediction,
	type PredictionInput
} from '../coil/predict.ts';
import type { Result } from '../coil/refuse.ts';
import { trackAt } from '../coil/response.ts';
import type { Uncertain } from '../coil/uncertainty.ts';
import { turnsForFullBobbin } from '../coil/winding.ts';
import { diameterToleranceM, leadOhmPerM } from '../coil/wire.ts';
import type { SpecContent, SpecWire } from './content.ts';

/** From what a spec says to what the computation takes. SI. */

/** How the player's controls stand, 0 to 10. */
export interface Dials {
	volume: number;
	tone: number;
}
export const dialsUp: Dials = { volume: 10, tone: 10 };

/** What coils are reckoned at unless somebody says otherwise: readings are brought there too. */
export const usualTemperatureC = 20;

/** How the prediction is asked: at a temperature, with the controls turned, with what kept coils say. */
export interface Asked {
	temperatureC?: number;
	dials?: Dials;
	calibration?: Calibration | null;
	/** The spool's wire in place of the spec's. */
	wire?: SpecWire | null;
}

/**
 * Relative half-width of a self-capacitance found with two added capacitors: what peaks read to one in a hundred leave of
 * it. No source.
 */
export const coilCapacitanceMeasuredPart = 0.1;

/** The coil every coil of this spec is: bobbin, wire, packing, and how far each may be off. */
export function specModel(content: SpecContent, spoolWire: SpecWire | null = null): CoilModel {
	const { bobbin, packing, cores, load } = content;
	const wire = spoolWire ?? content.wire;
	const halfWidths: Partial<HalfWidths> = {
		diameterM: diameterToleranceM(wire.diameterM),
		// A third at most is what the computation takes.
		packing: Math.min(packing.halfWidth, packing.value / 3)
	};
	if (wire.overallMinM !== null && wire.overallMaxM !== null && wire.overallMaxM > wire.overallMinM) {
		halfWidths.overallDiameterM = Math.min((wire.overallMaxM - wire.overallMinM) / 2, wire.overallDiameterM / 3);
	}
	if (load.coilF !== null) halfWidths.coilCapacitancePart = coilCapacitanceMeasuredPart;
	if (cores.measured) halfWidths.permeabilityPart = inductanceClaims.calibrated;
	return {
		bobbin: {
			straightM: bobbin.straightM,
			endDiameterM: bobbin.endDiameterM,
			traverseM: bobbin.traverseM,
			flangeOuterM: bobbin.flangeOuterM
		},
		wire: { diameterM: wire.diameterM, overallDiameterM: wire.overallDiameterM, ohmPerM: wire.ohmPerM },
		packing: packing.value,
		halfWidths
	};
}

/** Whether the two coils as wired cancel hum and are in phase; null for one coil. */
export function specTogether(content: SpecContent): { humCancelling: boolean; inPhase: boolean } | null {
	const [a, b] = content.coils;
	return a && b && content.wiring !== 'single' ? together(a, b) : null;
}

export function specInput(content: SpecContent, asked: Asked = {}): PredictionInput {
	const { load } = content;
	const dials = asked.dials ?? dialsUp;
	return {
		...specModel(content, asked.wire ?? null),
		turns: content.coils.map((coil) => coil.turns),
		connection: content.coils.length === 2 ? content.wiring : 'single',
		temperatureC: asked.temperatureC ?? usualTemperatureC,
		effectivePermeability: content.cores.effectivePermeability,
		spacingM: content.coilSpacingM,
		humCancelling: specTogether(content)?.humCancelling ?? true,
		calibration: asked.calibration ?? null,
		load: {
			volumePotOhm: load.volumePotOhm,
			volume: trackAt(dials.volume, load.volumeTaper),
			tonePotOhm: load.tonePotOhm,
			tone: trackAt(dials.tone, load.toneTaper),
			toneCapF: load.toneCapF,
			cableF: load.cableLengthM * load.cableFPerM,
			inputOhm: load.inputOhm,
			coilF: load.coilF,
			lossOhm: load.lossOhm
		}
	};
}

export const predictSpec = (content: SpecContent, asked: Asked = {}): Result<Prediction> =>
	predict(specInput(content, asked));

/** The resistance of `predictSpec` alone, in a hundredth of its time: for lists. */
export const predictSpecResistance = (content: SpecContent, asked: Asked = {}): Result<Uncertain<Contribution>> =>
	predictResistance(specInput(content, asked));

/** What one coil of the spec is predicted to measure by itself, at the turns it really has. */
export const predictCoil = (content: SpecContent, turns: number, asked: Asked = {}): Result<Prediction> =>
	predict({ ...specInput(content, asked), turns: [turns], connection: 'single', load: null });

/** Turns at which the wire reaches the flange, whole; null without a flange or where the figures make no sense. */
export function fullTurnsOf(content: SpecContent, spoolWire: SpecWire | null = null): number | null {
	if (content.bobbin.flangeOuterM === null) return null;
	const model = specModel(content, spoolWire);
	const full = turnsForFullBobbin({ ...model, temperatureC: usualTemperatureC });
	return full.ok && full.value >= 1 ? Math.floor(full.value) : null;
}

/** What the pickup's own leads add, there and back, in ohms: 28 AWG, the thinnest in use (common practice, no source). */
export const leadsOhm = (content: SpecContent): number => leadOhmPerM * content.leads.lengthM;
