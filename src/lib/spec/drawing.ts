import { turnsMax } from '../coil/limits.ts';
import { ok, type Result } from '../coil/refuse.ts';
import { shownValue, type UnitPreference } from '../coil/units.ts';
import { windCoil, type Bobbin, type Coil } from '../coil/winding.ts';
import { metresPerInch } from '../coil/wire.ts';
import type { SpecContent, SpecWire } from './content.ts';
import { roomMinM } from './figures.ts';
import { fullTurnsOf, specModel, usualTemperatureC } from './model.ts';
import { decimalText } from './words.ts';

/**
 * One coil to scale: where its core, copper and flanges lie on paper, and how a drag on the copper's edge turns into turns.
 * Lengths in metres become CSS pixels here; nothing of it knows a screen.
 */

/** `near`: less room than `roomMinM`; `over`: the copper stands beyond the flange. */
export type Fit = 'fits' | 'near' | 'over';

/** A racetrack or a circle: a rectangle whose ends are half circles. */
export interface Track {
	x: number;
	y: number;
	width: number;
	height: number;
	/** Of its ends. */
	radius: number;
}

export interface Rect {
	x: number;
	y: number;
	width: number;
	height: number;
}

export interface ScaleBar {
	widthPx: number;
	/** "10 mm", "½ in". */
	text: string;
}

export interface CoilDrawing {
	coil: Coil;
	fit: Fit;
	/** Whole turns that fill it to the flange; null without one. */
	fullTurns: number | null;
	/** As far as the edge can be dragged. */
	mostTurns: number;
	plan: {
		widthPx: number;
		heightPx: number;
		pxPerM: number;
		core: Track;
		/** Up to the flange at most: copper beyond it would not stay. */
		copper: Track;
		flange: Track | null;
		/** Outline of what does not fit; null where all does. */
		beyond: Track | null;
		bar: ScaleBar;
	};
	/** Cut across the middle: core between two flanges, copper on both sides. */
	section: {
		widthPx: number;
		heightPx: number;
		pxPerM: number;
		core: Rect;
		copper: readonly [left: Rect, right: Rect];
		flanges: readonly [top: Rect, bottom: Rect] | null;
		/** Where the guide stops end the winding, when there is no flange to do it. */
		stops: readonly [topPx: number, bottomPx: number];
		beyond: readonly [left: Rect, right: Rect] | null;
		/** One row of wires on the core, where a wire is large enough to be seen as one. */
		wires: readonly { x: number; y: number; radius: number }[];
		bar: ScaleBar;
	};
}

/** The edge can be dragged so much beyond the flange, of the depth that fills it: enough to see that it does not fit. */
const beyondPart = 1.1;
/** Without a flange nothing ends the copper: as deep as this, or as the core is wide where that is more. */
const deepestWithoutFlangeM = 0.015;
/** A wire drawn smaller than this is a grey row, not a wire. */
const wirePxMin = 5;
const wiresMax = 200;
/** Around the drawing, in pixels: the handle's hit area, and figures at the section's left. */
const planEdgePx = 12;
const sectionLeftPx = 72;
const sectionRightPx = 26;
const sectionHeightMaxPx = 220;
/** Flanges have no thickness in a spec: drawn as thin as fibre flanges are. */
const flangeThicknessM = 0.0012;
const roomForDimensionPx = 30;

/** How deep the winding may be drawn, in metres. */
function deepestM(bobbin: Bobbin): number {
	if (bobbin.flangeOuterM === null) return Math.max(deepestWithoutFlangeM, bobbin.endDiameterM);
	return ((bobbin.flangeOuterM - bobbin.endDiameterM) / 2) * beyondPart;
}

const barOf = (pxPerM: number, units: UnitPreference): ScaleBar =>
	units.length === 'inch'
		? { widthPx: 0.5 * metresPerInch * pxPerM, text: '½ in' }
		: { widthPx: 0.01 * pxPerM, text: '10 mm' };

export function fitOf(coil: Pick<Coil, 'roomM'>): Fit {
	if (coil.roomM === null) return 'fits';
	// A full bobbin's room comes out as nothing, give or take a rounding.
	if (coil.roomM < -1e-9) return 'over';
	return coil.roomM < roomMinM ? 'near' : 'fits';
}

/**
 * The drawing, or why there is none.
 *
 * @param widthPx of the paper
 * @param heldDepthM deepest copper the scale must leave space for: held while the edge is dragged, so that the paper stays
 */
export function drawCoil(
	content: SpecContent,
	index: number,
	wire: SpecWire,
	units: UnitPreference,
	widthPx: number,
	heldDepthM = 0
): Result<CoilDrawing> {
	const model = specModel(content, wire);
	const { bobbin } = model;
	const turns = content.coils[index]?.turns ?? 0;
	const wound = windCoil({ ...model, turns, temperatureC: usualTemperatureC });
	if (!wound.ok) return wound;
	const coil = wound.value;
	const fit = fitOf(coil);
	const flangeM = bobbin.flangeOuterM;
	const deepest = deepestM(bobbin);
	const mostTurns = Math.max(1, Math.min(turnsMax, Math.max(turns, Math.floor(deepest / coil.growthM))));

	const reachM = bobbin.endDiameterM + 2 * Math.max(deepest, coil.windingDepthM, heldDepthM);
	const copperM = flangeM === null ? coil.outerWidthM : Math.min(flangeM, coil.outerWidthM);

	const planPerM = (widthPx - 2 * planEdgePx) / (bobbin.straightM + reachM);
	const planHeightPx = reachM * planPerM + 2 * planEdgePx;
	const track = (widthM: number): Track => {
		const width = (bobbin.straightM + widthM) * planPerM;
		const height = widthM * planPerM;
		return { x: (widthPx - width) / 2, y: (planHeightPx - height) / 2, width, height, radius: height / 2 };
	};

	const thicknessM = flangeM === null ? 0 : flangeThicknessM;
	const across = widthPx - sectionLeftPx - sectionRightPx;
	const sectionPerM = Math.min(
		across / reachM,
		(sectionHeightMaxPx - roomForDimensionPx) / (bobbin.traverseM + 2 * thicknessM)
	);
	const middle = sectionLeftPx + across / 2;
	const top = planEdgePx + thicknessM * sectionPerM;
	const traversePx = bobbin.traverseM * sectionPerM;
	const coreHalf = (bobbin.endDiameterM / 2) * sectionPerM;
	const rect = (fromM: number, toM: number, sign: 1 | -1): Rect => {
		const width = (toM - fromM) * sectionPerM;
		const from = middle + sign * fromM * sectionPerM;
		return { x: sign === 1 ? from : from - width, y: top, width, height: traversePx };
	};
	const bothSides = (fromM: number, toM: number): [Rect, Rect] => [rect(fromM, toM, -1), rect(fromM, toM, 1)];
	const flange = (y: number): Rect => ({
		x: middle - (flangeM! / 2) * sectionPerM,
		y,
		width: flangeM! * sectionPerM,
		height: thicknessM * sectionPerM
	});

	return ok({
		coil,
		fit,
		fullTurns: fullTurnsOf(content, wire),
		mostTurns,
		plan: {
			widthPx,
			heightPx: planHeightPx,
			pxPerM: planPerM,
			core: track(bobbin.endDiameterM),
			copper: track(copperM),
			flange: flangeM === null ? null : track(flangeM),
			beyond: fit === 'over' ? track(coil.outerWidthM) : null,
			bar: barOf(planPerM, units)
		},
		section: {
			widthPx,
			heightPx: top + traversePx + thicknessM * sectionPerM + roomForDimensionPx,
			pxPerM: sectionPerM,
			core: { x: middle - coreHalf, y: top, width: 2 * coreHalf, height: traversePx },
			copper: bothSides(bobbin.endDiameterM / 2, copperM / 2),
			flanges: flangeM === null ? null : [flange(planEdgePx), flange(top + traversePx)],
			stops: [top, top + traversePx],
			beyond: fit === 'over' ? bothSides(copperM / 2, coil.outerWidthM / 2) : null,
			wires: wiresOf(wire.overallDiameterM * sectionPerM, turns, middle + coreHalf, top, traversePx),
			bar: barOf(sectionPerM, units)
		}
	});
}

function wiresOf(wirePx: number, turns: number, x: number, top: number, traversePx: number) {
	const inRow = Math.min(turns, Math.floor(traversePx / wirePx));
	if (wirePx < wirePxMin || inRow > wiresMax) return [];
	return Array.from({ length: inRow }, (_, i) => ({
		x: x + wirePx / 2,
		y: top + (i + 0.5) * wirePx,
		radius: wirePx / 2
	}));
}

/** Dragging goes in steps of ten turns: a pixel is worth dozens, and nobody winds to 4,983 by eye. */
const dragStep = 10;

/**
 * Turns after the copper's edge was dragged outwards by so many pixels. The edge follows the hand from where it was
 * grabbed, so that taking hold of it changes nothing.
 */
export function turnsAfterDrag(
	drawing: Pick<CoilDrawing, 'coil' | 'mostTurns'>,
	startTurns: number,
	outwardPx: number,
	pxPerM: number
): number {
	const raw = startTurns + outwardPx / pxPerM / drawing.coil.growthM;
	if (Math.abs(raw - startTurns) < dragStep / 2) return startTurns;
	return Math.min(drawing.mostTurns, Math.max(1, Math.round(raw / dragStep) * dragStep));
}

/** What a key on the copper's edge asks for. */
export interface KeyPress {
	key: string;
	shiftKey: boolean;
}

/**
 * Turns after a key: arrows ten, with shift or PageUp and PageDown a hundred, Home one turn, End a full bobbin. null: not a
 * key of the edge.
 */
export function turnsAfterKey(
	drawing: Pick<CoilDrawing, 'coil' | 'mostTurns' | 'fullTurns'>,
	{ key, shiftKey }: KeyPress
): number | null {
	const { turns } = drawing.coil;
	const by = (step: number) => Math.min(drawing.mostTurns, Math.max(1, turns + step));
	const arrow = shiftKey ? 100 : 10;
	switch (key) {
		case 'ArrowUp':
		case 'ArrowRight':
			return by(arrow);
		case 'ArrowDown':
		case 'ArrowLeft':
			return by(-arrow);
		case 'PageUp':
			return by(100);
		case 'PageDown':
			return by(-100);
		case 'Home':
			return 1;
		case 'End':
			return drawing.fullTurns ?? drawing.mostTurns;
		default:
			return null;
	}
}

/** As it is typed: figures of the spec. */
const typedText = (m: number, units: UnitPreference) => shownValue(m, 'length', units.length, 4);

const placed = (m: number, units: UnitPreference, placesMm: number, placesInch: number) =>
	units.length === 'inch'
		? { number: decimalText(m / metresPerInch, placesInch), unit: 'in' }
		: { number: decimalText(m * 1000, placesMm), unit: 'mm' };
const withUnit = ({ number, unit }: { number: string; unit: string }) => `${number} ${unit}`;

/** Hundredths of a millimetre, or thousandths of an inch: less cannot be seen. */
const roomText = (m: number, units: UnitPreference) => withUnit(placed(m, units, 2, 3));

/** "5.0 mm". */
export const depthText = (m: number, units: UnitPreference): string => withUnit(placed(m, units, 1, 2));

/** "67.0 × 16.2 mm". */
export const sizeText = (lengthM: number, widthM: number, units: UnitPreference): string =>
	`${placed(lengthM, units, 1, 2).number} × ${depthText(widthM, units)}`;

/** How the coil fits its flange, as a plain sentence with the reason. */
export function fitSentence({ coil, fit }: Pick<CoilDrawing, 'coil' | 'fit'>, units: UnitPreference): string {
	const { roomM } = coil;
	if (roomM === null) return 'No flange is given, so nothing says how much this bobbin holds.';
	if (fit === 'over')
		return `It does not fit: the copper would stand ${roomText(-roomM, units)} beyond the flange on each side. Wind fewer turns, or take thinner wire.`;
	if (fit === 'near')
		return `Only ${roomText(Math.max(0, roomM), units)} to the flange on each side: too little for tape, and the last turns may climb it.`;
	return `The copper stays ${roomText(roomM, units)} inside the flange on each side.`;
}

/** What the edge says of itself to those who hear it. */
export function edgeText({ coil, fit }: Pick<CoilDrawing, 'coil' | 'fit'>, units: UnitPreference): string {
	const turns = `${decimalText(coil.turns, 0)} ${coil.turns === 1 ? 'turn' : 'turns'}`;
	if (coil.roomM === null) return turns;
	if (fit === 'over') return `${turns}, ${roomText(-coil.roomM, units)} beyond the flange`;
	return `${turns}, ${roomText(Math.max(0, coil.roomM), units)} to the flange`;
}

/** The picture in words. */
export function pictureText(
	content: SpecContent,
	name: string,
	{ coil }: Pick<CoilDrawing, 'coil'>,
	units: UnitPreference
): { plan: string; section: string } {
	const { straightM, endDiameterM, traverseM, flangeOuterM } = content.bobbin;
	const flange = flangeOuterM === null ? '' : `, flange ${typedText(flangeOuterM, units)} wide`;
	return {
		plan: `${name} to scale, seen from above: core ${sizeText(straightM + endDiameterM, endDiameterM, units)}, copper ${sizeText(coil.outerLengthM, coil.outerWidthM, units)} over all${flange}.`,
		section: `${name} to scale, cut across: core ${typedText(endDiameterM, units)} wide, traverse ${typedText(traverseM, units)}, winding depth ${depthText(coil.windingDepthM, units)} on each side${flange}.`
	};
}
