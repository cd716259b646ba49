import { limits, turnsMax, windingDepthMaxM, within } from './limits.ts';
import { ok, outside, type Bound, type Refused, type Result } from './refuse.ts';
import { areaM2, atTemperature, copperKgPerM, ohmPerM } from './wire.ts';

/**
 * A coil on a convex core. A turn at depth x is P0 + 2πx long whatever the core's shape (the parallel curve of a convex
 * curve), so length and resistance are exact sums; outer size is that of a racetrack or a circle. SI throughout.
 */

/**
 * A racetrack core: two straights and two half circles. `straightM` 0 is a round core; any other convex core is told by the
 * racetrack of its perimeter (see `straightForPerimeter`).
 */
export interface Bobbin {
	straightM: number;
	/** Diameter of the half circles, the core's width. */
	endDiameterM: number;
	/** Between the flanges: what the guide stops leave of it. */
	traverseM: number;
	/** Width of the flange over all; null where there is none to run out of. */
	flangeOuterM: number | null;
}

export interface WireOnCoil {
	/** Bare conductor. */
	diameterM: number;
	/** Over the enamel. */
	overallDiameterM: number;
	/** Measured on this spool at 20 °C; null: by the conductor's size. */
	ohmPerM: number | null;
}

export interface CoilInput {
	bobbin: Bobbin;
	wire: WireOnCoil;
	turns: number;
	/** Part of the window that is wire: cell of a turn = d²/k. 0.7 to 0.9 scatter wound (common practice, no source). */
	packing: number;
	temperatureC: number;
}

export interface Coil {
	turns: number;
	/** Winding depth per turn, and of the coil. */
	growthM: number;
	windingDepthM: number;
	meanTurnM: number;
	lengthM: number;
	copperMassKg: number;
	resistanceOhm: number;
	/** Of the last turn: what one more adds. */
	ohmPerTurn: number;
	outerLengthM: number;
	outerWidthM: number;
	/** To the flange on each side; negative: it does not fit. null without a flange. */
	roomM: number | null;
	/** Copper's part of the window's cross-section. */
	copperFill: number;
}

/** How far the window is filled with wire, in the unit of one square per turn, and how sure that is. All may be edited. */
export const packings: readonly { key: string; name: string; usual: number; min: number; max: number }[] = [
	// Common practice, no source.
	{ key: 'scatter', name: 'scatter wound by hand', usual: 0.8, min: 0.7, max: 0.9 },
	{ key: 'guided', name: 'evenly guided', usual: 0.88, min: 0.82, max: 0.94 },
	// Square packing is 1; layers that nest come to 2/√3, and none does all the way.
	{ key: 'layered', name: 'in layers', usual: 1, min: 0.95, max: 1.08 }
];

const coreBounds = ({ bobbin, wire, temperatureC }: Omit<CoilInput, 'turns' | 'packing'>): Bound[] => [
	within('bobbin.straightM', bobbin.straightM),
	within('bobbin.endDiameterM', bobbin.endDiameterM),
	within('bobbin.traverseM', bobbin.traverseM),
	[
		'bobbin.flangeOuterM',
		bobbin.flangeOuterM ?? bobbin.endDiameterM,
		bobbin.endDiameterM,
		limits['bobbin.flangeOuterM'][1]
	],
	within('wire.diameterM', wire.diameterM),
	['wire.overallDiameterM', wire.overallDiameterM, wire.diameterM, limits['wire.overallDiameterM'][1]],
	within('wire.ohmPerM', wire.ohmPerM ?? 1),
	within('temperatureC', temperatureC)
];

const bounds = (input: Omit<CoilInput, 'turns'>): Bound[] => [...coreBounds(input), within('packing', input.packing)];

/** Most turns that make sense: so many that no winding is deeper than any pickup's. */
const mostTurns = (input: Omit<CoilInput, 'turns'>): number =>
	Math.min(turnsMax, windingDepthMaxM / growthPerTurnM(input.wire, input.packing, input.bobbin));

export function coilRefused(input: CoilInput): Refused | null {
	return outside(bounds(input)) ?? outside([['turns', input.turns, 0, mostTurns(input)]]);
}

export const perimeterM = (bobbin: Bobbin): number => 2 * bobbin.straightM + Math.PI * bobbin.endDiameterM;

/**
 * Straight length of the racetrack that has the same perimeter and width as another convex core: length, resistance and
 * depth come out exactly, outer length near enough.
 */
export function straightForPerimeter(corePerimeterM: number, endDiameterM: number): Result<number> {
	const refused = outside([within('bobbin.endDiameterM', endDiameterM)]);
	if (refused) return refused;
	const round = Math.PI * endDiameterM;
	const beyond = outside([['perimeterM', corePerimeterM, round, round + 2 * limits['bobbin.straightM'][1]]]);
	return beyond ?? ok((corePerimeterM - round) / 2);
}

/** Winding depth one turn adds: cell d²/k over the traverse. */
export const growthPerTurnM = (wire: WireOnCoil, packing: number, bobbin: Bobbin): number =>
	wire.overallDiameterM ** 2 / (packing * bobbin.traverseM);

/** Ω/m at a temperature: what this spool measured, else by size. */
export const wireOhmPerM = (wire: WireOnCoil, temperatureC: number): number =>
	wire.ohmPerM === null ? ohmPerM(wire.diameterM, temperatureC) : atTemperature(wire.ohmPerM, temperatureC);

/** Everything that follows from turns, wire, bobbin, packing and temperature. Refuses what makes no physical sense. */
export function windCoil(input: CoilInput): Result<Coil> {
	return coilRefused(input) ?? ok(woundCoil(input));
}

/** `windCoil` for an input that has been checked, or that lies beside one by its uncertainty. */
export function woundCoil({ bobbin, wire, turns, packing, temperatureC }: CoilInput): Coil {
	const p0 = perimeterM(bobbin);
	const g = growthPerTurnM(wire, packing, bobbin);
	const depth = g * turns;
	const length = turns * p0 + Math.PI * g * turns ** 2;
	const perM = wireOhmPerM(wire, temperatureC);
	const outerWidth = bobbin.endDiameterM + 2 * depth;
	return {
		turns,
		growthM: g,
		windingDepthM: depth,
		meanTurnM: p0 + Math.PI * depth,
		lengthM: length,
		copperMassKg: length * copperKgPerM(wire.diameterM),
		resistanceOhm: length * perM,
		ohmPerTurn: (p0 + 2 * Math.PI * depth) * perM,
		outerLengthM: bobbin.straightM + outerWidth,
		outerWidthM: outerWidth,
		roomM: bobbin.flangeOuterM === null ? null : (bobbin.flangeOuterM - outerWidth) / 2,
		copperFill: depth > 0 ? (turns * areaM2(wire.diameterM)) / (depth * bobbin.traverseM) : 0
	};
}

/** Turns whose length of wire is `lengthM`: the positive root of N·P0 + πgN². */
function turnsOfLength(input: Omit<CoilInput, 'turns'>, lengthM: number): number {
	const p0 = perimeterM(input.bobbin);
	const g = growthPerTurnM(input.wire, input.packing, input.bobbin);
	return (-p0 + Math.sqrt(p0 ** 2 + 4 * Math.PI * g * lengthM)) / (2 * Math.PI * g);
}

/** Turns for a wanted resistance at the input's temperature; need not be whole. */
export function turnsForResistance(input: Omit<CoilInput, 'turns'>, resistanceOhm: number): Result<number> {
	const refused = outside(bounds(input));
	if (refused) return refused;
	const most = woundCoil({ ...input, turns: mostTurns(input) }).resistanceOhm;
	const beyond = outside([['resistanceOhm', resistanceOhm, 0, most]]);
	if (beyond) return beyond;
	return ok(turnsOfLength(input, resistanceOhm / wireOhmPerM(input.wire, input.temperatureC)));
}

/** Turns that fill the bobbin to its flange, less a margin on each side. Refused where the bobbin has no flange. */
export function turnsForFullBobbin(input: Omit<CoilInput, 'turns'>, marginM = 0): Result<number> {
	const { bobbin } = input;
	const most = limits['bobbin.flangeOuterM'][1];
	const refused =
		outside(bounds(input)) ?? outside([['bobbin.flangeOuterM', bobbin.flangeOuterM ?? NaN, bobbin.endDiameterM, most]]);
	if (refused) return refused;
	const room = (bobbin.flangeOuterM! - bobbin.endDiameterM) / 2;
	const beyond = outside([['marginM', marginM, 0, room]]);
	if (beyond) return beyond;
	const turns = (room - marginM) / growthPerTurnM(input.wire, input.packing, bobbin);
	return ok(Math.min(turns, mostTurns(input)));
}

/**
 * Turns that the wire left on a spool makes, all on one core: may be more than it holds.
 *
 * @param copperKg the copper alone, without reel and enamel
 */
export function turnsForWireLeft(input: Omit<CoilInput, 'turns'>, copperKg: number): Result<number> {
	const refused = outside([...bounds(input), ['copperKg', copperKg, 0, 50]]);
	if (refused) return refused;
	return ok(turnsOfLength(input, copperKg / copperKgPerM(input.wire.diameterM)));
}

/** Packing that explains the outer width a wound coil was measured to have. */
export function packingFromWidth(input: Omit<CoilInput, 'packing'>, measuredOuterWidthM: number): Result<number> {
	const { bobbin, wire, turns } = input;
	const refused = outside([...coreBounds(input), ['turns', turns, 1, turnsMax]]);
	if (refused) return refused;
	const widthAt = (packing: number) => bobbin.endDiameterM + 2 * growthPerTurnM(wire, packing, bobbin) * turns;
	const [loosest, densest] = limits.packing;
	const beyond = outside([['measuredOuterWidthM', measuredOuterWidthM, widthAt(densest), widthAt(loosest)]]);
	if (beyond) return beyond;
	const depth = (measuredOuterWidthM - bobbin.endDiameterM) / 2;
	return ok((wire.overallDiameterM ** 2 * turns) / (depth * bobbin.traverseM));
}
