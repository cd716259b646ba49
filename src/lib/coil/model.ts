import { joinedOhm, type Connection } from './pickup.ts';
import { outside, type Refused } from './refuse.ts';
import { propagate, type Input } from './uncertainty.ts';
import { woundCoil, type Bobbin, type WireOnCoil } from './winding.ts';
import { diameterToleranceM, overallTolerancePart } from './wire.ts';

/** What coils of one bobbin and one spool have in common, and how far each figure of it may be off. SI. */
export interface CoilModel {
	bobbin: Bobbin;
	wire: WireOnCoil;
	packing: number;
	/** Half-widths of what is not known better than by default. */
	halfWidths?: Partial<HalfWidths>;
}

/** Each a limit either way with nothing known inside it. `…Part` is relative. */
export interface HalfWidths {
	diameterM: number;
	overallDiameterM: number;
	/** Of Ω/m measured on the spool. */
	ohmPerMPart: number;
	packing: number;
	/** Of the core's length and width. */
	bobbinPart: number;
	temperatureC: number;
	/** Of inductance without iron, by how evenly the turns lie. */
	airPart: number;
	/** Of the effective permeability. */
	permeabilityPart: number;
	/** Of the coil's self-capacitance. */
	coilCapacitancePart: number;
	/** Of the peak's height, by losses nobody has measured. */
	lossesDb: number;
}

/** Where nobody says better: tolerances of wire by size, the rest common practice without a source. */
export const usualHalfWidths = (wire: WireOnCoil): HalfWidths => ({
	diameterM: diameterToleranceM(wire.diameterM),
	overallDiameterM: overallTolerancePart * wire.overallDiameterM,
	ohmPerMPart: 0.005,
	packing: 0.1,
	bobbinPart: 0.01,
	temperatureC: 1,
	airPart: 0.02,
	permeabilityPart: 0.25,
	coilCapacitancePart: 0.3,
	lossesDb: 3
});

export const halfWidthsOf = (model: CoilModel): HalfWidths => ({ ...usualHalfWidths(model.wire), ...model.halfWidths });

export function halfWidthsRefused(model: CoilModel): Refused | null {
	const half = halfWidthsOf(model);
	return outside([
		// A third of the figure at most, so that no input reaches zero or below within its own uncertainty.
		['halfWidths.diameterM', half.diameterM, 0, model.wire.diameterM / 3],
		['halfWidths.overallDiameterM', half.overallDiameterM, 0, model.wire.overallDiameterM / 3],
		['halfWidths.ohmPerMPart', half.ohmPerMPart, 0, 1 / 3],
		['halfWidths.packing', half.packing, 0, model.packing / 3],
		['halfWidths.bobbinPart', half.bobbinPart, 0, 1 / 3],
		['halfWidths.temperatureC', half.temperatureC, 0, 50],
		['halfWidths.airPart', half.airPart, 0, 1 / 3],
		['halfWidths.permeabilityPart', half.permeabilityPart, 0, 1 / 3],
		['halfWidths.coilCapacitancePart', half.coilCapacitancePart, 0, 0.5],
		['halfWidths.lossesDb', half.lossesDb, 0, 20]
	]);
}

/** Standard uncertainty of a limit ±a with nothing known inside it (JCGM 100, 4.3.7). */
const standard = (halfWidth: number): number => halfWidth / Math.sqrt(3);

export type WindingInput = 'diameter' | 'overallDiameter' | 'ohmPerM' | 'packing' | 'bobbin';

/** What the winding depends on, with uncertainties; `atValues` takes their values in this order. */
export function windingInputs(model: CoilModel): Input<WindingInput>[] {
	const half = halfWidthsOf(model);
	return [
		{ name: 'diameter', value: model.wire.diameterM, uncertainty: standard(half.diameterM) },
		{ name: 'overallDiameter', value: model.wire.overallDiameterM, uncertainty: standard(half.overallDiameterM) },
		{ name: 'ohmPerM', value: 1, uncertainty: model.wire.ohmPerM === null ? 0 : standard(half.ohmPerMPart) },
		{ name: 'packing', value: model.packing, uncertainty: standard(half.packing) },
		{ name: 'bobbin', value: 1, uncertainty: standard(half.bobbinPart) }
	];
}

/** So many values `atValues` takes. */
export const windingInputCount = 5;

/** The model with other values of its inputs. */
export function atValues(model: CoilModel, values: readonly number[]): CoilModel {
	const [diameterM = 0, overallDiameterM = 0, ohmPerMFactor = 1, packing = 0, bobbinFactor = 1] = values;
	const { bobbin, wire } = model;
	return {
		...model,
		packing,
		wire: { diameterM, overallDiameterM, ohmPerM: wire.ohmPerM === null ? null : wire.ohmPerM * ohmPerMFactor },
		bobbin: {
			...bobbin,
			straightM: bobbin.straightM * bobbinFactor,
			endDiameterM: bobbin.endDiameterM * bobbinFactor
		}
	};
}

/** Ω of coils joined, by a model that has been checked. */
export function modelOhm(
	model: CoilModel,
	turns: readonly number[],
	connection: Connection,
	temperatureC: number
): number {
	const { bobbin, wire, packing } = model;
	return joinedOhm(
		turns.map((count) => woundCoil({ bobbin, wire, packing, temperatureC, turns: count }).resistanceOhm),
		connection
	);
}

/** Relative standard uncertainty of a resistance by the model alone, at 20 °C. */
export function modelUncertainty(model: CoilModel, turns: readonly number[], connection: Connection): number {
	const { ohm } = propagate(windingInputs(model), (values) => ({
		ohm: modelOhm(atValues(model, values), turns, connection, 20)
	}));
	return ohm === null || ohm.value === 0 ? 0 : ohm.uncertainty / ohm.value;
}
