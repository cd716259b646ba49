import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { genericBobbins } from './bobbins.ts';
import { calibrate } from './calibrate.ts';
import { airInductanceH, inductanceClaims, inductanceRatio, mutualBesideH } from './inductance.ts';
import { halfWidthsOf } from './model.ts';
import { joinedHenry } from './pickup.ts';
import { predict, predictResistance, type PredictionInput } from './predict.ts';
import type { Result } from './refuse.ts';
import { coilCapacitanceF, peakOf, usualLoad } from './response.ts';
import { propagate, type Uncertain } from './uncertainty.ts';
import { windCoil, type CoilInput } from './winding.ts';
import { awgDiameterM } from './wire.ts';

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}

const { bobbin, packing, spacingM } = genericBobbins.find((generic) => generic.key === 'two-coil')!;
const input: PredictionInput = {
	bobbin,
	packing,
	spacingM,
	wire: { diameterM: awgDiameterM(42), overallDiameterM: 71e-6, ohmPerM: null },
	turns: [4950, 4850],
	connection: 'series',
	temperatureC: 22,
	effectivePermeability: 2.4,
	load: usualLoad
};
const coilOf = (turns: number, other: Partial<CoilInput> = {}) =>
	value(windCoil({ bobbin, packing, wire: input.wire, temperatureC: input.temperatureC, turns, ...other }));
const windowOf = (coil: { windingDepthM: number }, core = bobbin) => ({ ...core, windingDepthM: coil.windingDepthM });

describe('a prediction', () => {
	it('is what its parts say one by one', () => {
		const { figures, coils, mutualAirH, peakHz, peakDb } = value(predict(input));
		const [first, second] = [coilOf(4950), coilOf(4850)];
		expect(figures.resistanceOhm.value).toBeCloseTo(first.resistanceOhm + second.resistanceOhm, 6);
		expect(figures.lengthM.value).toBeCloseTo(first.lengthM + second.lengthM, 9);
		expect(figures.copperMassKg.value).toBeCloseTo(first.copperMassKg + second.copperMassKg, 12);
		for (const key of ['meanTurnM', 'windingDepthM', 'outerLengthM', 'outerWidthM', 'copperFill'] as const)
			expect(figures[key].value).toBeCloseTo(first[key], 12);
		expect(coils.map((coil) => coil.turns)).toEqual([4950, 4850]);
		expect(coils[1]!.resistanceOhm).toBeCloseTo(second.resistanceOhm, 6);

		const henries = [first, second].map((coil) => value(airInductanceH(windowOf(coil), coil.turns)));
		const sides = [first, second].map((coil) => ({ window: windowOf(coil), turns: coil.turns }));
		const between = value(mutualBesideH(sides[0]!, sides[1]!, spacingM!));
		expect(mutualAirH).toBeCloseTo(-between, 12);
		expect(figures.airInductanceH.value).toBeCloseTo(henries[0]! + henries[1]! + 2 * mutualAirH, 9);
		expect(figures.inductanceH.value).toBeCloseTo(2.4 * figures.airInductanceH.value, 9);

		const circuit = {
			...usualLoad,
			inductanceH: figures.inductanceH.value,
			resistanceOhm: figures.resistanceOhm.value
		};
		const peak = value(peakOf(circuit))!;
		expect(peakHz!.value).toBeCloseTo(peak.hz, 3);
		expect(peakDb!.value).toBeCloseTo(peak.db, 6);
	});

	it('in parallel has less of everything electric, and alone what the first has', () => {
		const [series, parallel, single] = (['series', 'parallel', 'single'] as const).map(
			(connection) => value(predict({ ...input, connection })).figures
		);
		expect(parallel!.resistanceOhm.value).toBeLessThan(single!.resistanceOhm.value);
		expect(single!.resistanceOhm.value).toBeCloseTo(coilOf(4950).resistanceOhm, 6);
		expect(series!.inductanceH.value).toBeGreaterThan(3 * parallel!.inductanceH.value);
		expect(parallel!.lengthM.value).toBe(series!.lengthM.value);
	});

	it('of coils wired in one sense has less inductance than of coils wired against hum', () => {
		const [against, along] = [true, false].map((humCancelling) => value(predict({ ...input, humCancelling })));
		expect(along!.mutualAirH).toBe(-against!.mutualAirH);
		expect(along!.figures.inductanceH.value).toBeLessThan(against!.figures.inductanceH.value);
	});

	it.each(['series', 'parallel', 'single'] as const)(
		'has the same resistance alone as with all the rest, %s',
		(joined) => {
			const own = { ...input, connection: joined, turns: joined === 'single' ? [4950] : [4950, 4850] };
			const kept = { turns: [4950], connection: 'single' as const, ohmAt20C: 3800, uncertaintyOhm: 12, meterOhm: 8 };
			for (const calibration of [null, value(calibrate(input, [kept]))]) {
				const whole = value(predict({ ...own, calibration })).figures.resistanceOhm;
				const alone = value(predictResistance({ ...own, calibration }));
				expect(alone.value).toBeCloseTo(whole.value, 9);
				expect(alone.uncertainty).toBeCloseTo(whole.uncertainty, 9);
				expect(alone.parts.map(({ name }) => name)).toEqual(whole.parts.map(({ name }) => name));
			}
			expect(predictResistance({ ...own, turns: [0] })).toMatchObject({ ok: false, field: 'turns[0]' });
		}
	);

	it('says what contributes, the most first', () => {
		const { figures, peakHz, peakDb } = value(predict(input));
		expect(figures.resistanceOhm.parts[0]!.name).toBe('diameter');
		expect(figures.windingDepthM.parts.map((part) => part.name)).toEqual(['overallDiameter', 'packing']);
		expect(figures.inductanceH.parts[0]!.name).toBe('permeability');
		expect(peakHz!.parts[0]!.name).toBe('permeability');
		expect(peakDb!.parts[0]!.name).toBe('losses');
		for (const figure of [...Object.values(figures), peakHz!, peakDb!]) {
			const squares = figure.parts.reduce((sum, part) => sum + part.uncertainty ** 2, 0);
			expect(figure.uncertainty).toBeCloseTo(Math.sqrt(squares), 12);
			const sizes = figure.parts.map((part) => part.uncertainty);
			expect(sizes).toEqual([...sizes].sort((a, b) => b - a));
		}
	});

	it('claims no more than ±2 % of air, ±25 % of iron, and little of a measured coil', () => {
		const relative = (figure: Uncertain) => (Math.sqrt(3) * figure.uncertainty) / figure.value;
		const plain = value(predict(input)).figures;
		expect(relative(plain.airInductanceH)).toBeGreaterThan(0.02);
		expect(relative(plain.inductanceH)).toBeGreaterThan(0.25);
		const halfWidths = { permeabilityPart: inductanceClaims.calibrated };
		const measured = value(predict({ ...input, halfWidths })).figures;
		expect(relative(measured.inductanceH)).toBeLessThan(0.07);
		const without = value(predict({ ...input, effectivePermeability: null })).figures;
		expect(without.inductanceH).toEqual(without.airInductanceH);
	});

	it('by a measured Ω/m does not depend on the diameter any more', () => {
		const measured = { ...input, wire: { ...input.wire, ohmPerM: 5.5 } };
		const { resistanceOhm } = value(predict(measured)).figures;
		expect(resistanceOhm.parts.map((part) => part.name)).not.toContain('diameter');
		expect(resistanceOhm.parts.map((part) => part.name)).toContain('ohmPerM');
		expect(resistanceOhm.uncertainty).toBeLessThan(value(predict(input)).figures.resistanceOhm.uncertainty / 2);
	});

	it('of looser winding rings higher where nobody measured the capacitance', () => {
		// Less capacitance makes it brighter, by more than the deeper winding makes it darker.
		for (const generic of genericBobbins) {
			const count = generic.spacingM === null ? 1 : 2;
			const turns = Array.from({ length: count }, () => generic.turns);
			let before = Infinity;
			for (const loose of [0.7, 0.75, 0.8, 0.85, 0.9]) {
				const load = { ...usualLoad, coilF: null };
				const { peakHz, coilF } = value(
					predict({ ...input, bobbin: generic.bobbin, turns, spacingM: null, packing: loose, load })
				);
				expect(peakHz!.value, `${generic.key} ${loose}`).toBeLessThan(before);
				expect(coilF).toBe(coilCapacitanceF(loose));
				before = peakHz!.value;
			}
		}
	});

	it('of more turns of the same wire on the same bobbin has more resistance and rings lower', () => {
		const [fewer, more] = [4800, 5300].map((turns) => value(predict({ ...input, turns: [turns, turns] })));
		expect(more!.figures.resistanceOhm.value).toBeGreaterThan(fewer!.figures.resistanceOhm.value);
		expect(more!.figures.inductanceH.value).toBeGreaterThan(fewer!.figures.inductanceH.value);
		expect(more!.peakHz!.value).toBeLessThan(fewer!.peakHz!.value);
	});

	it('has no peak without a load, or with the pots down', () => {
		expect(value(predict({ ...input, load: null }))).toMatchObject({ peakHz: null, peakDb: null, coilF: null });
		const down = value(predict({ ...input, load: { ...usualLoad, volume: 0 } }));
		expect(down).toMatchObject({ peakHz: null, peakDb: null });
	});

	it('names what makes no sense', () => {
		const field = (other: Partial<PredictionInput>) => predict({ ...input, ...other });
		expect(field({ turns: [] })).toMatchObject({ field: 'turns.length' });
		expect(field({ turns: [5000, 0] })).toMatchObject({ field: 'turns[1]', min: 1, got: 0 });
		expect(field({ turns: [NaN] })).toMatchObject({ field: 'turns[0]', got: null });
		expect(field({ spacingM: 0.01 })).toMatchObject({ field: 'spacingM' });
		expect(field({ effectivePermeability: -1 })).toMatchObject({ field: 'effectivePermeability' });
		expect(field({ load: { ...usualLoad, cableF: NaN } })).toMatchObject({ field: 'load.cableF' });
		expect(field({ halfWidths: { packing: 0.7 } })).toMatchObject({ field: 'halfWidths.packing' });
	});

	it('of two coils in series has the sum of what they have', () => {
		fc.assert(
			fc.property(fc.integer({ min: 1000, max: 6000 }), fc.integer({ min: 1000, max: 6000 }), (a, b) => {
				const far = { ...input, load: null, spacingM: null };
				const ohm = (turns: number[]) => value(predict({ ...far, turns })).figures.resistanceOhm.value;
				expect(ohm([a, b])).toBeCloseTo(ohm([a]) + ohm([b]), 6);
			}),
			{ numRuns: 20 }
		);
	});
});

/** A small generator with a seed (mulberry32), so that each run draws the same. */
function drawing(seed: number): () => number {
	let state = seed;
	return () => {
		state = (state + 0x6d2b79f5) | 0;
		let t = Math.imul(state ^ (state >>> 15), 1 | state);
		t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t;
		return ((t ^ (t >>> 14)) >>> 0) / 2 ** 32;
	};
}
const deviation = (values: readonly number[]): number => {
	const mean = values.reduce((sum, each) => sum + each, 0) / values.length;
	return Math.sqrt(values.reduce((sum, each) => sum + (each - mean) ** 2, 0) / (values.length - 1));
};

describe('uncertainty by propagation agrees with Monte Carlo', () => {
	const half = halfWidthsOf(input);
	const samples = 1500;

	/** One pickup as it may turn out: every input anywhere within its limits. */
	function pickup(draw: () => number) {
		const off = (halfWidth: number) => (2 * draw() - 1) * halfWidth;
		const size = 1 + off(half.bobbinPart);
		const core = {
			...bobbin,
			straightM: bobbin.straightM * size,
			endDiameterM: bobbin.endDiameterM * size
		};
		const wire = {
			diameterM: input.wire.diameterM + off(half.diameterM),
			overallDiameterM: input.wire.overallDiameterM + off(half.overallDiameterM),
			ohmPerM: null
		};
		const packed = packing + off(half.packing);
		const common = { bobbin: core, wire, packing: packed };
		return { common, off };
	}

	it('for everything a pickup is predicted to have', () => {
		const draw = drawing(20261201);
		const predicted = value(predict(input));
		const nominal = [coilOf(4950), coilOf(4850)];
		const full = nominal.map((coil) => value(airInductanceH(windowOf(coil), coil.turns)));
		const coupling = predicted.mutualAirH / Math.sqrt(full[0]! * full[1]!);
		const seen: Record<string, number[]> = {};
		const note = (name: string, figure: number) => (seen[name] ??= []).push(figure);
		for (let i = 0; i < samples; i += 1) {
			const { common, off } = pickup(draw);
			const temperatureC = input.temperatureC + off(half.temperatureC);
			const coils = [4950, 4850].map((turns) => value(windCoil({ ...common, temperatureC, turns })));
			// From coil to coil: normal, as a sum of twelve.
			const scatter = 0.005 * (Array.from({ length: 12 }, draw).reduce((sum, each) => sum + each, 0) - 6);
			const resistanceOhm = (coils[0]!.resistanceOhm + coils[1]!.resistanceOhm) * (1 + scatter);
			const even = 1 + off(half.airPart);
			const henries = coils.map(
				(coil, k) => even * full[k]! * value(inductanceRatio(windowOf(nominal[k]!), windowOf(coil, common.bobbin)))
			);
			const airH = joinedHenry(henries, 'series', coupling * Math.sqrt(henries[0]! * henries[1]!));
			const inductanceH = airH * 2.4 * (1 + off(half.permeabilityPart));
			const coilF = usualLoad.coilF * (1 + off(half.coilCapacitancePart));
			const peak = value(peakOf({ ...usualLoad, inductanceH, resistanceOhm, coilF }))!;
			note('resistanceOhm', resistanceOhm);
			note('lengthM', coils[0]!.lengthM + coils[1]!.lengthM);
			note('copperMassKg', coils[0]!.copperMassKg + coils[1]!.copperMassKg);
			note('windingDepthM', coils[0]!.windingDepthM);
			note('outerWidthM', coils[0]!.outerWidthM);
			note('copperFill', coils[0]!.copperFill);
			note('airInductanceH', airH);
			note('inductanceH', inductanceH);
			note('peakHz', peak.hz);
			note('peakDb', peak.db + off(half.lossesDb));
		}
		const said: Record<string, Uncertain | null> = {
			...predicted.figures,
			peakHz: predicted.peakHz,
			peakDb: predicted.peakDb
		};
		for (const [name, values] of Object.entries(seen))
			expect(Math.abs(said[name]!.uncertainty / deviation(values) - 1), name).toBeLessThan(0.1);
	});

	it('for the resistance of a coil after one was measured', () => {
		const draw = drawing(7);
		const shared = 0.003;
		const own = 0.003;
		const kept = (ohmAt20C: number) => ({
			turns: [4950, 4850],
			connection: 'series' as const,
			ohmAt20C,
			uncertaintyOhm: Math.hypot(shared, own) * ohmAt20C,
			meterOhm: shared * ohmAt20C
		});
		const nominal = value(predict({ ...input, temperatureC: 20 })).figures.resistanceOhm.value;
		const at20 = { ...input, temperatureC: 20, turns: [8000], connection: 'single' as const, load: null };
		const model = { bobbin, packing, wire: input.wire };
		const said = value(predict({ ...at20, calibration: value(calibrate(model, [kept(nominal)])) }));
		// How far predictions lie from what the next coil turns out to be, over all the wires and hands there may be.
		const errors: number[] = [];
		const normal = (sigma: number) =>
			sigma * (Array.from({ length: 12 }, draw).reduce((sum, each) => sum + each, 0) - 6);
		for (let i = 0; i < 300; i += 1) {
			const { common, off } = pickup(draw);
			const wound = (turns: number, temperatureC = 20) =>
				value(windCoil({ ...common, temperatureC, turns })).resistanceOhm;
			const first = (wound(4950) + wound(4850)) * (1 + normal(0.005));
			const measured = first * (1 + normal(shared) + normal(own));
			const calibration = value(calibrate(model, [kept(measured)]));
			const ohm = value(predict({ ...at20, calibration })).figures.resistanceOhm.value;
			const next = wound(8000, 20 + off(half.temperatureC)) * (1 + normal(0.005));
			errors.push(ohm - next);
		}
		const spread = Math.sqrt(errors.reduce((sum, error) => sum + error ** 2, 0) / errors.length);
		expect(Math.abs(said.figures.resistanceOhm.uncertainty / spread - 1)).toBeLessThan(0.1);
	});
});

describe('propagation', () => {
	it('is exact where a figure is straight', () => {
		const { figure } = propagate(
			[
				{ name: 'a', value: 10, uncertainty: 0.3 },
				{ name: 'b', value: 5, uncertainty: 0.4 },
				{ name: 'sure', value: 1, uncertainty: 0 }
			],
			([a = 0, b = 0, sure = 0]) => ({ figure: a - 3 * b + sure })
		);
		expect(figure!.value).toBe(-4);
		expect(figure!.uncertainty).toBeCloseTo(Math.hypot(0.3, 1.2), 12);
		expect(figure!.parts.map((part) => part.name)).toEqual(['b', 'a']);
	});

	it('goes by one side where the other has no figure, and has none where there is none', () => {
		const { half, none } = propagate([{ name: 'a', value: 1, uncertainty: 0.1 }], ([a = 0]) => ({
			half: a > 1 ? null : 2 * a,
			none: null
		}));
		expect(half!.uncertainty).toBeCloseTo(0.2, 12);
		expect(none).toBeNull();
	});
});
