import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { calibrate, type Calibration } from '../coil/calibrate.ts';
import type { Result } from '../coil/refuse.ts';
import { usualUnits } from '../coil/units.ts';
import { copperKgPerM } from '../coil/wire.ts';
import type { SpecContent } from './content.ts';
import { fullTurnsOf, predictSpec, specModel } from './model.ts';
import { startingSpec } from './start.ts';
import {
	answerFor,
	changeText,
	enamelPart,
	turnsFor,
	turnsMore,
	typedChange,
	withTurns,
	type Wanted
} from './turns-for.ts';

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}

const two = (a = 5320, b = 5240): SpecContent => {
	const content = startingSpec('two-coils', 'Evening bridge');
	content.coilSpacingM = 0.03;
	content.coils[0]!.turns = a;
	content.coils[1]!.turns = b;
	return content;
};
const one = () => startingSpec('one-coil', 'Evening neck');
const ask = (content: SpecContent, wanted: Wanted, calibration: Calibration | null = null) =>
	turnsFor(content, content.wire, calibration, wanted);
const ohms = (content: SpecContent, turns: readonly number[], calibration: Calibration | null = null) =>
	value(predictSpec(withTurns(content, turns), { calibration })).figures.resistanceOhm.value;

describe('turns for a resistance', () => {
	it('keep the difference between the coils', () => {
		const turns = value(ask(two(), { kind: 'resistance', ohm: 8000 }));
		expect(turns[0]! - turns[1]!).toBe(80);
	});

	it('are the nearest whole ones: one more or one less is further off', () => {
		for (const content of [two(), two(3000, 5000), { ...two(), wiring: 'parallel' as const }, one()]) {
			const ohm = content.wiring === 'parallel' ? 2000 : 6000;
			const turns = value(ask(content, { kind: 'resistance', ohm }));
			const off = (by: number) =>
				Math.abs(
					ohms(
						content,
						turns.map((each) => each + by)
					) - ohm
				);
			expect(off(0)).toBeLessThanOrEqual(off(1));
			expect(off(0)).toBeLessThanOrEqual(off(-1));
		}
	});

	it('are those of the closed formula for one coil', () => {
		// Case A of 3700 Ω: 4961.5419 turns, calculated from N for R: (−P0 + √(P0² + 4πgR/r))/(2πg).
		const content = one();
		content.bobbin = { ...content.bobbin, straightM: 0.0508, endDiameterM: 0.006, traverseM: 0.0062 };
		content.packing.value = 0.8;
		content.wire = {
			...content.wire,
			diameterM: 0.06334065e-3,
			overallDiameterM: 0.071e-3,
			overallMinM: null,
			overallMaxM: null
		};
		expect(value(ask(content, { kind: 'resistance', ohm: 3700 }))).toEqual([4962]);
	});

	it('are the inverse of the prediction, with and without kept coils', () => {
		const content = two();
		const calibration = value(
			calibrate(specModel(content), [
				{ turns: [4950, 4850], connection: 'series', ohmAt20C: 7650, uncertaintyOhm: 30, meterOhm: 22 }
			])
		);
		fc.assert(
			fc.property(
				fc.integer({ min: 300, max: 7000 }),
				fc.integer({ min: -290, max: 290 }),
				fc.boolean(),
				fc.constantFrom('series' as const, 'parallel' as const, 'single' as const),
				(turns, apart, calibrated, wiring) => {
					const from = { ...two(4000, 4000 + apart), wiring };
					const wound = [turns, turns + apart];
					const use = calibrated ? calibration : null;
					// Far apart, so that no number of turns makes them touch.
					from.coilSpacingM = 0.1;
					expect(value(ask(from, { kind: 'resistance', ohm: ohms(from, wound, use) }, use))).toEqual(wound);
				}
			),
			{ numRuns: 40 }
		);
	});

	it('follow what kept coils measured', () => {
		const content = two(5000, 5000);
		const higher = value(
			calibrate(specModel(content), [
				{ turns: [5000, 5000], connection: 'series', ohmAt20C: 7900, uncertaintyOhm: 20, meterOhm: 10 }
			])
		);
		const plain = value(ask(content, { kind: 'resistance', ohm: 7500 }))[0]!;
		const calibrated = value(ask(content, { kind: 'resistance', ohm: 7500 }, higher))[0]!;
		expect(calibrated).toBeLessThan(plain);
		expect(ohms(content, [calibrated, calibrated], higher)).toBeCloseTo(7500, -1);
	});

	it('refuse what no such coil can measure', () => {
		expect(ask(two(), { kind: 'resistance', ohm: 1e7 })).toMatchObject({ ok: false, field: 'resistanceOhm' });
		expect(ask(two(), { kind: 'resistance', ohm: -5 })).toMatchObject({ ok: false, field: 'resistanceOhm' });
		expect(ask(two(), { kind: 'resistance', ohm: NaN })).toMatchObject({ ok: false, got: null });
		const bad = two();
		bad.wire.overallDiameterM = 1e-5;
		expect(ask(bad, { kind: 'resistance', ohm: 7500 })).toMatchObject({ ok: false, field: 'wire.overallDiameterM' });
	});

	it('leave no coil without a turn', () => {
		const lopsided = two(5000, 100);
		const least = ask(lopsided, { kind: 'resistance', ohm: 100 });
		expect(least).toMatchObject({ ok: false, field: 'resistanceOhm' });
		// 4,901 turns and one: the least that keeps the difference.
		if (!least.ok) expect(least.min).toBeCloseTo(ohms(lopsided, [4901, 1]), 6);
	});
});

describe('turns for a full bobbin', () => {
	it('fill the coil with most turns and not one more', () => {
		const content = two();
		const turns = value(ask(content, { kind: 'full', marginM: 0 }));
		expect(turns).toEqual([fullTurnsOf(content), fullTurnsOf(content)! - 80]);
	});

	it('leave the margin asked for', () => {
		const content = two(5000, 5100);
		const { turns, prediction } = value(answerFor(content, content.wire, null, { kind: 'full', marginM: 0.0008 }));
		expect(turns[1]! - turns[0]!).toBe(100);
		const room = value(prediction).coils[1]!.roomM!;
		expect(room).toBeGreaterThanOrEqual(0.0008);
		expect(room).toBeLessThan(0.0008 + value(prediction).coils[1]!.growthM);
	});

	it('refuse a bobbin without a flange and a margin beyond its room', () => {
		const content = two();
		expect(ask(content, { kind: 'full', marginM: 0.01 })).toMatchObject({ ok: false, field: 'marginM' });
		content.bobbin.flangeOuterM = null;
		expect(ask(content, { kind: 'full', marginM: 0 })).toMatchObject({ ok: false, field: 'bobbin.flangeOuterM' });
	});
});

describe('turns for the wire left', () => {
	it('use it up for all coils together and never more', () => {
		for (const content of [two(), one()]) {
			const turns = value(ask(content, { kind: 'length', lengthM: 1000 }));
			const used = (by: number) =>
				value(
					predictSpec(
						withTurns(
							content,
							turns.map((each) => each + by)
						)
					)
				).figures.lengthM.value;
			expect(used(0)).toBeLessThanOrEqual(1000);
			expect(used(1)).toBeGreaterThan(1000);
		}
	});

	it('are the same by weight of copper as by its length', () => {
		const content = two();
		const copperKg = 900 * copperKgPerM(content.wire.diameterM);
		expect(value(ask(content, { kind: 'mass', copperKg }))).toEqual(
			value(ask(content, { kind: 'length', lengthM: 900 }))
		);
	});

	it('refuse no wire at all', () => {
		expect(ask(one(), { kind: 'mass', copperKg: 0 })).toMatchObject({ ok: false, field: 'copperKg' });
		expect(ask(one(), { kind: 'length', lengthM: -1 })).toMatchObject({ ok: false, field: 'lengthM' });
	});
});

describe('the answer', () => {
	it('comes with what it would measure', () => {
		const content = two();
		const answer = value(answerFor(content, content.wire, null, { kind: 'resistance', ohm: 7500 }));
		expect(answer.content.coils.map((coil) => coil.turns)).toEqual(answer.turns);
		expect(value(answer.prediction).figures.resistanceOhm.value).toBeCloseTo(7500, -1);
		expect(content.coils[0]!.turns).toBe(5320);
	});
});

describe('what some turns more do', () => {
	it('is the difference of two predictions', () => {
		const content = two();
		const change = value(turnsMore(content, content.wire, null, 200));
		expect(change.ohm.value).toBeCloseTo(ohms(content, [5520, 5440]) - ohms(content, [5320, 5240]), 6);
		expect(change.depth.value).toBeGreaterThan(0);
		expect(change.hertz!.value).toBeLessThan(0);
		expect(value(turnsMore(content, content.wire, null, -200)).ohm.value).toBeLessThan(0);
		// The same from a prediction that is known already.
		expect(value(turnsMore(content, content.wire, null, 200, predictSpec(content)))).toEqual(change);
	});

	it('is told with signs and directions', () => {
		const said = (more: number) =>
			changeText(value(turnsMore(two(), two().wire, null, more)), usualUnits).replaceAll('\u00a0', ' ');
		expect(said(200)).toMatch(
			/^\+3\d\d Ω ± \d+, 0\.20\d? mm ± 0\.0\d+ less room to the flange, the peak \d+ Hz ± \d+ lower$/
		);
		expect(said(-200)).toMatch(
			/^−3\d\d Ω ± \d+, 0\.20\d? mm ± 0\.0\d+ more room to the flange, the peak \d+ Hz ± \d+ higher$/
		);
	});

	it('speaks of depth where there is no flange', () => {
		const content = two();
		content.bobbin.flangeOuterM = null;
		expect(changeText(value(turnsMore(content, content.wire, null, 200)), usualUnits)).toMatch(/deeper, the peak/);
		expect(changeText(value(turnsMore(content, content.wire, null, -200)), usualUnits)).toMatch(/less deep, the peak/);
	});

	it('says nothing of a peak where there is none', () => {
		const content = two();
		content.load.volumePotOhm = 5000;
		const change = value(turnsMore(content, content.wire, null, 200));
		expect(change.hertz).toBeNull();
		expect(changeText(change, usualUnits)).not.toContain('peak');
	});

	it('is refused where no turns are left', () => {
		expect(turnsMore(one(), one().wire, null, -9000)).toMatchObject({ ok: false, field: 'turns[0]' });
	});

	it.each([
		['200', 200],
		['-1,000', -1000],
		['−50 turns', -50],
		['+ 75', 75],
		['0', 0],
		['-0', 0],
		['1e3', null],
		['2.5', null],
		['', null],
		['999999', null]
	])('reads %j as %j', (text, turns) => {
		expect(typedChange(text)).toBe(turns);
	});
});

describe('enamel', () => {
	it('is a few hundredths of the weight of thin wire', () => {
		// AWG 42 single, .0028 in over all: 28.0 mg/m of copper; (π/4)(.07112² − .06334²) mm² of 1,300 kg/m³ are 1.07 mg/m.
		expect(enamelPart(one().wire)).toBeCloseTo(1.069 / (28.013 + 1.069), 3);
	});
});
