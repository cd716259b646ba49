import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import type { Result } from '../coil/refuse.ts';
import { usualUnits, type UnitPreference } from '../coil/units.ts';
import type { SpecContent } from './content.ts';
import {
	drawCoil,
	edgeText,
	fitOf,
	fitSentence,
	pictureText,
	turnsAfterDrag,
	turnsAfterKey,
	type CoilDrawing
} from './drawing.ts';
import { roomMinM } from './figures.ts';
import { startingSpec } from './start.ts';

const inches: UnitPreference = { ...usualUnits, length: 'inch' };

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}
const spec = (turns = 5000): SpecContent => {
	const content = startingSpec('two-coils', 'Evening bridge');
	content.coils[0]!.turns = turns;
	return content;
};
const drawn = (content: SpecContent, widthPx = 320, units = usualUnits, held = 0): CoilDrawing =>
	value(drawCoil(content, 0, content.wire, units, widthPx, held));

describe('the plan', () => {
	it('is to scale: core, copper and flange stand to one another as their sizes do', () => {
		const { plan, coil } = drawn(spec());
		const { straightM, endDiameterM, flangeOuterM } = spec().bobbin;
		expect(plan.core.height / plan.pxPerM).toBeCloseTo(endDiameterM, 9);
		expect(plan.core.width / plan.pxPerM).toBeCloseTo(straightM + endDiameterM, 9);
		expect(plan.copper.height / plan.pxPerM).toBeCloseTo(coil.outerWidthM, 9);
		expect(plan.copper.width / plan.pxPerM).toBeCloseTo(coil.outerLengthM, 9);
		expect(plan.flange!.height / plan.pxPerM).toBeCloseTo(flangeOuterM!, 9);
		expect(plan.bar.widthPx / plan.pxPerM).toBeCloseTo(0.01, 9);
		expect(plan.bar.text).toBe('10 mm');
	});

	it('has a bar of half an inch for whoever measures in inches', () => {
		const { plan } = drawn(spec(), 320, inches);
		expect(plan.bar.widthPx / plan.pxPerM).toBeCloseTo(0.0127, 9);
		expect(plan.bar.text).toBe('½ in');
	});

	it('is a circle for a round core', () => {
		const content = spec(2000);
		content.bobbin = { ...content.bobbin, straightM: 0, endDiameterM: 0.012, flangeOuterM: 0.03 };
		const { core, copper } = drawn(content).plan;
		for (const { width, height, radius } of [core, copper]) {
			expect(width).toBeCloseTo(height, 9);
			expect(radius).toBeCloseTo(height / 2, 9);
		}
	});
});

describe('the cut', () => {
	it('is to scale, with copper of the traverse’s height on both sides of the core', () => {
		const { section, coil } = drawn(spec());
		const { endDiameterM, traverseM } = spec().bobbin;
		expect(section.core.width / section.pxPerM).toBeCloseTo(endDiameterM, 9);
		for (const side of section.copper) {
			expect(side.width / section.pxPerM).toBeCloseTo(coil.windingDepthM, 9);
			expect(side.height / section.pxPerM).toBeCloseTo(traverseM, 9);
		}
		const [left, right] = section.copper;
		expect(left.x + left.width).toBeCloseTo(section.core.x, 9);
		expect(right.x).toBeCloseTo(section.core.x + section.core.width, 9);
	});

	it('shows wires only where one is large enough to be seen', () => {
		expect(drawn(spec()).section.wires).toEqual([]);
		const thick = spec(30);
		thick.wire = { ...thick.wire, diameterM: 0.0005, overallDiameterM: 0.00055, overallMinM: null, overallMaxM: null };
		const { wires, pxPerM } = drawn(thick, 480).section;
		// 6.2 mm of traverse hold eleven wires of 0.55 mm.
		expect(wires).toHaveLength(11);
		expect((2 * wires[0]!.radius) / pxPerM).toBeCloseTo(0.00055, 9);
	});
});

describe('copper', () => {
	it('is never drawn outside the paper or beyond its flange, whatever the turns', () => {
		fc.assert(
			fc.property(
				fc.integer({ min: 1, max: 20_000 }),
				fc.integer({ min: 240, max: 560 }),
				fc.boolean(),
				fc.double({ min: 0, max: 0.06, noNaN: true }),
				(turns, widthPx, flange, straightM) => {
					const content = spec(turns);
					content.bobbin.straightM = straightM;
					if (!flange) content.bobbin.flangeOuterM = null;
					const { plan, section } = drawn(content, widthPx);
					const tracks = [
						plan.copper,
						plan.core,
						...(plan.flange ? [plan.flange] : []),
						...(plan.beyond ? [plan.beyond] : [])
					];
					for (const { x, y, width, height } of tracks) {
						expect(x).toBeGreaterThanOrEqual(0);
						expect(y).toBeGreaterThanOrEqual(0);
						expect(x + width).toBeLessThanOrEqual(plan.widthPx + 1e-6);
						expect(y + height).toBeLessThanOrEqual(plan.heightPx + 1e-6);
					}
					if (plan.flange) expect(plan.copper.height).toBeLessThanOrEqual(plan.flange.height + 1e-6);
					for (const { x, width } of [...section.copper, ...(section.beyond ?? [])]) {
						expect(width).toBeGreaterThanOrEqual(0);
						expect(x).toBeGreaterThanOrEqual(0);
						expect(x + width).toBeLessThanOrEqual(section.widthPx + 1e-6);
					}
				}
			),
			{ numRuns: 200 }
		);
	});

	it('beyond the flange is an outline of what does not fit', () => {
		const { plan, section, fit, coil } = drawn(spec(6200));
		expect(fit).toBe('over');
		expect(plan.beyond!.height / plan.pxPerM).toBeCloseTo(coil.outerWidthM, 9);
		expect(section.beyond![1].width / section.pxPerM).toBeCloseTo(-coil.roomM!, 9);
		expect(drawn(spec()).plan.beyond).toBeNull();
	});

	it('is not drawn at all for figures that make no sense', () => {
		const content = spec();
		content.wire.overallDiameterM = 0.00001;
		expect(drawCoil(content, 0, content.wire, usualUnits, 320)).toMatchObject({
			ok: false,
			field: 'wire.overallDiameterM'
		});
	});

	it('follows the spool’s wire', () => {
		const content = spec();
		const thick = { ...content.wire, overallDiameterM: content.wire.overallDiameterM * 1.05 };
		const drawing = value(drawCoil(content, 0, thick, usualUnits, 320));
		expect(drawing.coil.windingDepthM).toBeGreaterThan(drawn(content).coil.windingDepthM);
	});
});

describe('how it fits', () => {
	it('turns from fitting to near to over as turns are added', () => {
		expect(drawn(spec(5000)).fit).toBe('fits');
		expect(drawn(spec(5300)).fit).toBe('near');
		expect(drawn(spec(5700)).fit).toBe('over');
		expect(fitOf({ roomM: roomMinM })).toBe('fits');
		expect(fitOf({ roomM: null })).toBe('fits');
	});

	it('is near, not over, at a bobbin filled to its last turn', () => {
		const full = drawn(spec()).fullTurns!;
		expect(drawn(spec(full)).fit).toBe('near');
		expect(drawn(spec(full + 1)).fit).toBe('over');
	});

	it('is said in a plain sentence with the reason', () => {
		expect(fitSentence(drawn(spec(5000)), usualUnits)).toBe('The copper stays 0.65 mm inside the flange on each side.');
		expect(fitSentence(drawn(spec(5300)), usualUnits)).toBe(
			'Only 0.35 mm to the flange on each side: too little for tape, and the last turns may climb it.'
		);
		expect(fitSentence(drawn(spec(6200)), usualUnits)).toMatch(
			/^It does not fit: the copper would stand 0\.57 mm beyond the flange on each side\. Wind fewer turns/
		);
		expect(edgeText(drawn(spec(5000)), inches)).toBe('5,000 turns, 0.026 in to the flange');
		expect(edgeText(drawn(spec(6200)), usualUnits)).toBe('6,200 turns, 0.57 mm beyond the flange');
		expect(edgeText(drawn(spec(1)), usualUnits)).toMatch(/^1 turn, /);
	});

	it('says that nothing is known without a flange', () => {
		const content = spec();
		content.bobbin.flangeOuterM = null;
		const drawing = drawn(content);
		expect(drawing.plan.flange).toBeNull();
		expect(drawing.section.flanges).toBeNull();
		expect(fitSentence(drawing, usualUnits)).toMatch(/^No flange is given/);
		expect(edgeText(drawing, usualUnits)).toBe('5,000 turns');
	});

	it('is told in words to who cannot see the picture', () => {
		const words = pictureText(spec(), 'Screw coil', drawn(spec()), usualUnits);
		expect(words.plan).toBe(
			'Screw coil to scale, seen from above: core 56.8 × 6.0 mm, copper 67.0 × 16.2 mm over all, flange 17.5 mm wide.'
		);
		expect(words.section).toMatch(/traverse 6\.2 mm, winding depth 5\.1 mm on each side/);
	});
});

describe('the copper’s edge', () => {
	it('taken hold of changes nothing, and comes back to where it was', () => {
		const drawing = drawn(spec(4983));
		expect(turnsAfterDrag(drawing, 4983, 0, drawing.section.pxPerM)).toBe(4983);
		const there = turnsAfterDrag(drawing, 4983, -40, drawing.section.pxPerM);
		expect(there).toBeLessThan(4983);
		expect(turnsAfterDrag(drawing, 4983, 0, drawing.section.pxPerM)).toBe(4983);
	});

	it('lies under the hand after a drag, to ten turns', () => {
		const drawing = drawn(spec());
		const { pxPerM, core } = drawing.section;
		for (const outwardPx of [-30, -7, 4]) {
			const turns = turnsAfterDrag(drawing, 5000, outwardPx, pxPerM);
			expect(turns % 10).toBe(0);
			const moved = drawn(spec(turns)).section;
			const edge = (of: CoilDrawing['section']) => of.copper[1].x + of.copper[1].width;
			const tenTurnsPx = 10 * drawing.coil.growthM * pxPerM;
			expect(Math.abs(edge(moved) - edge(drawing.section) - outwardPx)).toBeLessThanOrEqual(tenTurnsPx);
			expect(moved.core).toEqual(core);
		}
	});

	it('stays between one turn and a little beyond the flange', () => {
		const drawing = drawn(spec());
		expect(turnsAfterDrag(drawing, 5000, -1e6, drawing.plan.pxPerM)).toBe(1);
		expect(turnsAfterDrag(drawing, 5000, 1e6, drawing.plan.pxPerM)).toBe(drawing.mostTurns);
		expect(drawing.mostTurns).toBeGreaterThan(drawing.fullTurns!);
		expect(drawing.mostTurns).toBeLessThan(1.2 * drawing.fullTurns!);
	});

	it('keeps the paper where it is while it is dragged inwards', () => {
		const content = spec(12_000);
		content.bobbin.flangeOuterM = null;
		content.bobbin.traverseM = 0.003;
		const before = drawn(content);
		const held = before.coil.windingDepthM;
		const after = structuredClone(content);
		after.coils[0]!.turns = 3000;
		expect(drawn(after, 320, usualUnits, held).plan.pxPerM).toBeCloseTo(before.plan.pxPerM, 9);
		expect(drawn(after).plan.pxPerM).toBeGreaterThan(before.plan.pxPerM);
	});

	it('takes keys: tens, hundreds, one turn and a full bobbin', () => {
		const drawing = drawn(spec());
		const press = (key: string, shiftKey = false) => turnsAfterKey(drawing, { key, shiftKey });
		expect(press('ArrowRight')).toBe(5010);
		expect(press('ArrowUp')).toBe(5010);
		expect(press('ArrowLeft')).toBe(4990);
		expect(press('ArrowDown', true)).toBe(4900);
		expect(press('PageUp')).toBe(5100);
		expect(press('PageDown')).toBe(4900);
		expect(press('Home')).toBe(1);
		expect(press('End')).toBe(drawing.fullTurns);
		expect(press('Tab')).toBeNull();
		expect(turnsAfterKey(drawn(spec(4)), { key: 'ArrowLeft', shiftKey: false })).toBe(1);
	});

	it('goes as far as it can be dragged where no flange fills', () => {
		const content = spec();
		content.bobbin.flangeOuterM = null;
		const drawing = drawn(content);
		expect(turnsAfterKey(drawing, { key: 'End', shiftKey: false })).toBe(drawing.mostTurns);
	});
});
