import { turnsMax } from './limits.ts';
import { halfWidthsRefused, modelOhm, modelUncertainty, type CoilModel } from './model.ts';
import type { Connection } from './pickup.ts';
import { ok, outside, type Refused, type Result } from './refuse.ts';
import { coilRefused } from './winding.ts';

/**
 * What coils that were wound and measured say about the next of the same bobbin and spool. One scale factor over the
 * model's resistance, never two: two fitted to a handful of coils would bend how resistance grows with turns, while half a
 * kelvin explains as much as their differences tell. A scale above zero leaves that growth what geometry makes it.
 */

/** One coil, or one pickup of two, that was kept and measured. */
export interface KeptCoil {
	/** Turns on the bobbin, of each coil. */
	turns: readonly number[];
	connection: Connection;
	/** Reading brought to 20 °C. */
	ohmAt20C: number;
	/** Its standard uncertainty in all… */
	uncertaintyOhm: number;
	/** …and the part that all readings with the same meter share: averaging does not lessen it. */
	meterOhm: number;
}

export interface Calibration {
	kept: readonly KeptCoil[];
	/** Over the model's resistance, with the relative standard uncertainty of it. */
	scale: number;
	uncertainty: number;
	/** Relative standard deviation from coil to coil, the next one's too. */
	scatter: number;
	/** Measured over modelled of each coil, and its share of the kept coils' say; the shares add up to one. */
	coils: readonly { ratio: number; share: number }[];
	/** The kept coils' say against the model's own figures: near 1 as soon as one coil was measured well. */
	keptShare: number;
	/** Relative standard uncertainty of the kept coils' mean ratio. */
	keptUncertainty: number;
}

/** Scatter from coil to coil before there are enough to see it, worth as much as `scatterPriorCoils` seen. No source. */
export const scatterPrior = 0.005;
const scatterPriorCoils = 4;
/** A coil further from the model than this is open, shorted, or not of this wire and bobbin. */
const ratioMin = 0.7;
const ratioMax = 1.4;
const keptMax = 1000;
/** The model is never taken to be surer than this, whatever half-widths are given. */
const modelUncertaintyMin = 1e-4;

/** What `calibrate` refuses of kept coils; null: nothing. */
export function keptRefused(model: CoilModel, kept: readonly KeptCoil[]): Refused | null {
	const refused =
		outside([['kept.length', kept.length, 1, keptMax]]) ??
		coilRefused({ ...model, turns: 0, temperatureC: 20 }) ??
		halfWidthsRefused(model);
	if (refused) return refused;
	for (const [i, coil] of kept.entries()) {
		const name = `kept[${i}]`;
		const bad = outside([[`${name}.turns.length`, coil.turns.length, 1, 2]]) ?? turnsRefused(model, name, coil.turns);
		if (bad) return bad;
		const modelled = modelOhm(model, coil.turns, coil.connection, 20);
		const beyond = outside([
			[`${name}.ohmAt20C`, coil.ohmAt20C, ratioMin * modelled, ratioMax * modelled],
			[`${name}.uncertaintyOhm`, coil.uncertaintyOhm, 0, 0.2 * coil.ohmAt20C],
			[`${name}.meterOhm`, coil.meterOhm, 0, coil.uncertaintyOhm]
		]);
		if (beyond) return beyond;
	}
	return null;
}

export function calibrate(model: CoilModel, kept: readonly KeptCoil[]): Result<Calibration> {
	const refused = keptRefused(model, kept);
	if (refused) return refused;

	const seen = kept.map((coil) => ({
		ratio: coil.ohmAt20C / modelOhm(model, coil.turns, coil.connection, 20),
		own: (coil.uncertaintyOhm ** 2 - coil.meterOhm ** 2) / coil.ohmAt20C ** 2,
		shared: coil.meterOhm / coil.ohmAt20C
	}));
	const n = seen.length;
	const mean = seen.reduce((sum, coil) => sum + coil.ratio, 0) / n;
	// What readings alone would spread is not the coils' scatter.
	const spread = seen.reduce((sum, coil) => sum + (coil.ratio - mean) ** 2, 0);
	const byReadings = (seen.reduce((sum, coil) => sum + coil.own, 0) * (n - 1)) / n;
	const scatter = Math.sqrt(
		(scatterPriorCoils * scatterPrior ** 2 + Math.max(0, spread - byReadings)) / (scatterPriorCoils + n - 1)
	);
	const weights = seen.map((coil) => 1 / (coil.own + scatter ** 2));
	const total = weights.reduce((sum, weight) => sum + weight, 0);
	const share = weights.map((weight) => weight / total);
	const ratio = seen.reduce((sum, coil, i) => sum + coil.ratio * share[i]!, 0);
	const shared = seen.reduce((sum, coil, i) => sum + coil.shared * share[i]!, 0);
	const keptUncertainty = Math.hypot(Math.sqrt(1 / total), shared);

	const [first] = kept;
	const before = Math.max(modelUncertaintyMin, modelUncertainty(model, first!.turns, first!.connection));
	const keptShare = before ** 2 / (before ** 2 + keptUncertainty ** 2);
	return ok({
		kept,
		scale: 1 + keptShare * (ratio - 1),
		uncertainty: Math.sqrt(keptShare) * keptUncertainty,
		scatter,
		coils: seen.map((coil, i) => ({ ratio: coil.ratio, share: share[i]! })),
		keptShare,
		keptUncertainty
	});
}

function turnsRefused(model: CoilModel, name: string, turns: readonly number[]) {
	for (const [i, count] of turns.entries()) {
		const bad =
			outside([[`${name}.turns[${i}]`, count, 1, turnsMax]]) ??
			coilRefused({ ...model, turns: count, temperatureC: 20 });
		if (bad) return { ...bad, field: bad.field === 'turns' ? `${name}.turns[${i}]` : bad.field };
	}
	return null;
}

/**
 * The scale at other values of the model's inputs: what the kept coils were measured to be stays, so what a wrong diameter
 * does to the next coil it did to them, and cancels.
 */
export function scaleAt(calibration: Calibration, model: CoilModel): number {
	let ratio = 0;
	for (const [i, coil] of calibration.kept.entries()) {
		const share = calibration.coils[i]?.share ?? 0;
		ratio += (share * coil.ohmAt20C) / modelOhm(model, coil.turns, coil.connection, 20);
	}
	return 1 + calibration.keptShare * (ratio - 1);
}
