import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { limits } from './limits.ts';
import type { Result } from './refuse.ts';
import {
	packingFromWidth,
	perimeterM,
	straightForPerimeter,
	turnsForFullBobbin,
	turnsForResistance,
	turnsForWireLeft,
	windCoil,
	type Bobbin,
	type CoilInput
} from './winding.ts';
import { awgDiameterM, ohmPerM } from './wire.ts';

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}

const mm = (straight: number, end: number, traverse: number, flange: number | null = null): Bobbin => ({
	straightM: straight / 1000,
	endDiameterM: end / 1000,
	traverseM: traverse / 1000,
	flangeOuterM: flange === null ? null : flange / 1000
});
const awg42 = { diameterM: awgDiameterM(42), overallDiameterM: 71e-6, ohmPerM: null };
const caseA: CoilInput = { bobbin: mm(50.8, 6, 6.2), wire: awg42, turns: 5000, packing: 0.8, temperatureC: 20 };

const within = (actual: number, expected: number, relative: number) =>
	expect(Math.abs(actual / expected - 1)).toBeLessThan(relative);

describe('a wound coil', () => {
	// calc: turn-by-turn sum agrees to 1e-13.
	it('of case A has the figures an independent sum gives', () => {
		const coil = value(windCoil(caseA));
		within(coil.meanTurnM, 0.13641404, 1e-7);
		within(coil.lengthM, 682.0702, 1e-7);
		within(coil.resistanceOhm, 3732.039, 1e-7);
		within(coil.windingDepthM, 5.08165e-3, 1e-6);
		within(coil.outerLengthM, 66.9633e-3, 1e-6);
		within(coil.outerWidthM, 16.1633e-3, 1e-5);
		within(coil.copperMassKg, 19.107e-3, 1e-4);
	});

	// calc.
	it.each([
		['flat', mm(51, 4.9, 11.2), 8000, 1041.9866, 5701.37],
		['wide', mm(50, 6, 6.35), 10_000, 1471.9023, 8053.712]
	])('of the %s case has the figures an independent sum gives', (_, bobbin, turns, lengthM, resistanceOhm) => {
		const coil = value(windCoil({ ...caseA, bobbin, turns, packing: 0.88 }));
		within(coil.lengthM, lengthM, 1e-7);
		within(coil.resistanceOhm, resistanceOhm, 1e-6);
	});

	it('is as long as its turns one by one', () => {
		const coil = value(windCoil(caseA));
		let sum = 0;
		// Each turn at the middle of what it adds.
		for (let n = 0; n < 5000; n += 1) sum += perimeterM(caseA.bobbin) + 2 * Math.PI * coil.growthM * (n + 0.5);
		within(coil.lengthM, sum, 1e-12);
	});

	it('adds by one more turn what the last turn has', () => {
		const coil = value(windCoil(caseA));
		const next = value(windCoil({ ...caseA, turns: 5001 }));
		within(next.resistanceOhm - coil.resistanceOhm, coil.ohmPerTurn, 1e-4);
	});

	it('by what its spool measures, not by the size of its wire, where that is known', () => {
		const measured = { ...awg42, ohmPerM: ohmPerM(awg42.diameterM) * 1.03 };
		within(value(windCoil({ ...caseA, wire: measured })).resistanceOhm, 3732.039 * 1.03, 1e-7);
	});

	it('says what is left to the flange, and by how much it does not fit', () => {
		const room = (flange: number) => value(windCoil({ ...caseA, bobbin: mm(50.8, 6, 6.2, flange) })).roomM!;
		expect(room(17.5)).toBeCloseTo(0.00066835, 7);
		expect(room(15)).toBeLessThan(0);
		expect(value(windCoil(caseA)).roomM).toBeNull();
	});

	it('is never fuller of copper than round wires can lie', () => {
		const bare = { ...awg42, overallDiameterM: awg42.diameterM };
		const coil = value(windCoil({ ...caseA, wire: bare, packing: limits.packing[1] }));
		within(coil.copperFill, Math.PI / (2 * Math.sqrt(3)), 1e-12);
	});

	it('with no turns is no coil', () => {
		const coil = value(windCoil({ ...caseA, turns: 0 }));
		expect([coil.lengthM, coil.resistanceOhm, coil.windingDepthM, coil.copperFill]).toEqual([0, 0, 0, 0]);
	});

	it('outside physical sense is refused with the field and its range', () => {
		expect(windCoil({ ...caseA, turns: NaN })).toMatchObject({ ok: false, field: 'turns', min: 0, got: null });
		expect(windCoil({ ...caseA, packing: 1.5 })).toMatchObject({ field: 'packing', got: 1.5 });
		expect(windCoil({ ...caseA, bobbin: mm(50.8, 6, 6.2, 5) })).toMatchObject({
			field: 'bobbin.flangeOuterM',
			min: 0.006
		});
		const thin = { ...awg42, overallDiameterM: 50e-6 };
		expect(windCoil({ ...caseA, wire: thin })).toMatchObject({ field: 'wire.overallDiameterM', min: awg42.diameterM });
		// A winding deeper than any pickup's.
		const thick = { ...awg42, overallDiameterM: 1e-3 };
		expect(windCoil({ ...caseA, wire: thick })).toMatchObject({ field: 'turns' });
	});
});

const bobbins = fc.record({
	straightM: fc.double({ min: 0, max: 0.1, noNaN: true }),
	endDiameterM: fc.double({ min: 0.003, max: 0.03, noNaN: true }),
	traverseM: fc.double({ min: 0.004, max: 0.02, noNaN: true }),
	flangeOuterM: fc.constant(null)
});
const inputs = fc.record({
	bobbin: bobbins,
	wire: fc
		.tuple(fc.double({ min: 40e-6, max: 90e-6, noNaN: true }), fc.double({ min: 1.05, max: 1.3, noNaN: true }))
		.map(([diameterM, over]) => ({ diameterM, overallDiameterM: diameterM * over, ohmPerM: null })),
	packing: fc.double({ min: 0.6, max: 1, noNaN: true }),
	temperatureC: fc.double({ min: -10, max: 60, noNaN: true })
});
const counts = fc.integer({ min: 1, max: 12_000 });

describe('turns for', () => {
	// calc.
	it('3700 Ω in case A are 4961.5419', () => {
		expect(Math.abs(value(turnsForResistance(caseA, 3700)) - 4961.5419)).toBeLessThan(1e-4);
	});

	it('a resistance give that resistance', () => {
		fc.assert(
			fc.property(inputs, counts, (input, turns) => {
				const coil = value(windCoil({ ...input, turns }));
				const again = value(turnsForResistance(input, coil.resistanceOhm));
				expect(Math.abs(again - turns)).toBeLessThan(1e-6 * turns);
			})
		);
	});

	it('a full bobbin come to its flange, less the margin asked for', () => {
		const bobbin = mm(50.8, 6, 6.2, 17.5);
		const full = value(turnsForFullBobbin({ ...caseA, bobbin }));
		expect(value(windCoil({ ...caseA, bobbin, turns: full })).roomM).toBeCloseTo(0, 12);
		const less = value(turnsForFullBobbin({ ...caseA, bobbin }, 0.001));
		expect(value(windCoil({ ...caseA, bobbin, turns: less })).roomM).toBeCloseTo(0.001, 12);
	});

	it('a full bobbin need a flange, and a margin no wider than the room', () => {
		expect(turnsForFullBobbin(caseA)).toMatchObject({ ok: false, field: 'bobbin.flangeOuterM', got: null });
		const refused = turnsForFullBobbin({ ...caseA, bobbin: mm(50.8, 6, 6.2, 17.5) }, 0.01);
		expect(refused).toMatchObject({ ok: false, field: 'marginM' });
	});

	it('the wire left on a spool use it up', () => {
		const turns = value(turnsForWireLeft(caseA, 0.019107));
		within(turns, 5000, 1e-4);
	});

	it('a resistance no pickup has are refused with the most there is', () => {
		expect(turnsForResistance(caseA, 1e9)).toMatchObject({ ok: false, field: 'resistanceOhm' });
	});
});

it('the packing a measured width tells of gives that width', () => {
	fc.assert(
		fc.property(inputs, fc.integer({ min: 500, max: 12_000 }), ({ packing, ...input }, turns) => {
			const coil = value(windCoil({ ...input, packing, turns }));
			const again = value(packingFromWidth({ ...input, turns }, coil.outerWidthM));
			expect(Math.abs(again / packing - 1)).toBeLessThan(1e-6);
		})
	);
	expect(packingFromWidth(caseA, 0.1)).toMatchObject({ ok: false, field: 'measuredOuterWidthM' });
});

it('more turns never have less resistance, length, depth or mass', () => {
	fc.assert(
		fc.property(inputs, counts, counts, (input, a, b) => {
			const [few, many] = [Math.min(a, b), Math.max(a, b)].map((turns) => value(windCoil({ ...input, turns })));
			expect(many!.resistanceOhm).toBeGreaterThanOrEqual(few!.resistanceOhm);
			expect(many!.lengthM).toBeGreaterThanOrEqual(few!.lengthM);
			expect(many!.windingDepthM).toBeGreaterThanOrEqual(few!.windingDepthM);
			expect(many!.copperMassKg).toBeGreaterThanOrEqual(few!.copperMassKg);
			// Each turn lies further out than the one before.
			expect(many!.ohmPerTurn).toBeGreaterThanOrEqual(few!.ohmPerTurn);
		})
	);
});

it('a core of any convex shape winds as the racetrack of its perimeter', () => {
	// A rectangle of 50 by 5 mm: turns at depth x are 110 mm + 2πx long.
	const straightM = value(straightForPerimeter(0.11, 0.005));
	const bobbin = { ...caseA.bobbin, straightM, endDiameterM: 0.005 };
	expect(perimeterM(bobbin)).toBeCloseTo(0.11, 12);
	expect(straightForPerimeter(0.01, 0.005)).toMatchObject({ ok: false, field: 'perimeterM' });
});
