import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { genericBobbins } from './bobbins.ts';
import { calibrate, scatterPrior, type Calibration, type KeptCoil } from './calibrate.ts';
import type { CoilModel } from './model.ts';
import { predict, type PredictionInput } from './predict.ts';
import type { Result } from './refuse.ts';
import { awgDiameterM } from './wire.ts';

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}

const { bobbin, packing } = genericBobbins.find((generic) => generic.key === 'two-coil')!;
const model: CoilModel = {
	bobbin,
	packing,
	wire: { diameterM: awgDiameterM(42), overallDiameterM: 71e-6, ohmPerM: null }
};
const kept = (turns: number[], ohmAt20C: number, part = 0.004, meterPart = 0.003): KeptCoil => ({
	turns,
	connection: 'series',
	ohmAt20C,
	uncertaintyOhm: part * ohmAt20C,
	meterOhm: meterPart * ohmAt20C
});
const resistance = (turns: number[], calibration: Calibration | null = null, other: Partial<PredictionInput> = {}) =>
	value(
		predict({
			...model,
			turns,
			connection: 'series',
			temperatureC: 20,
			effectivePermeability: null,
			load: null,
			calibration,
			...other
		})
	).figures.resistanceOhm;

describe('pickups of AWG 42 poly-coated wire as the trade knows them', () => {
	// Facts of common practice, no source: 4,950 and 4,850 turns measure 7.33 kΩ in series, 5,207 and 5,107 7.70 kΩ.
	it.each([
		[[4950, 4850], 7330],
		[[5207, 5107], 7700]
	])('one generic bobbin predicts %j turns to be %f Ω within 0.5 %%', (turns, ohm) => {
		expect(Math.abs(resistance(turns).value / ohm - 1)).toBeLessThan(0.005);
	});

	it('calibrated on the first, it predicts the second within 1 %', () => {
		const calibration = value(calibrate(model, [kept([4950, 4850], 7330)]));
		expect(Math.abs(resistance([4950, 4850], calibration).value / 7330 - 1)).toBeLessThan(0.001);
		expect(Math.abs(resistance([5207, 5107], calibration).value / 7700 - 1)).toBeLessThan(0.01);
	});

	it('both lie in the band predicted from the other', () => {
		const from = (turns: number[], ohm: number, next: number[], measured: number) => {
			const { value: expected, uncertainty } = resistance(next, value(calibrate(model, [kept(turns, ohm)])));
			expect(Math.abs(measured - expected)).toBeLessThan(2 * uncertainty);
		};
		from([4950, 4850], 7330, [5207, 5107], 7700);
		from([5207, 5107], 7700, [4950, 4850], 7330);
	});
});

describe('a calibration', () => {
	it('narrows the band, and more coils narrow it further', () => {
		const plain = resistance([5000, 5000]).uncertainty;
		const ohm = resistance([5000, 5000]).value;
		let before = plain;
		for (const n of [1, 3, 10, 40]) {
			const coils = Array.from({ length: n }, () => kept([5000, 5000], 1.01 * ohm));
			const { uncertainty } = resistance([5000, 5000], value(calibrate(model, coils)));
			expect(uncertainty).toBeLessThan(before);
			before = uncertainty;
		}
		expect(before).toBeLessThan(plain / 5);
	});

	it('never becomes surer than the meter all readings share', () => {
		const ohm = resistance([5000, 5000]).value;
		const coils = Array.from({ length: 200 }, () => kept([5000, 5000], ohm, 0.004, 0.004));
		const { uncertainty } = value(calibrate(model, coils));
		expect(uncertainty).toBeGreaterThan(0.0039);
	});

	it('takes the scatter of the coils into account', () => {
		const ohm = resistance([5000, 5000]).value;
		const coils = (spread: number) =>
			Array.from({ length: 20 }, (_, i) => kept([5000, 5000], ohm * (1 + (i % 2 ? spread : -spread))));
		const even = value(calibrate(model, coils(0)));
		const wild = value(calibrate(model, coils(0.03)));
		expect(even.scatter).toBeLessThan(scatterPrior);
		expect(wild.scatter).toBeGreaterThan(0.025);
		expect(wild.scatter).toBeLessThan(0.031);
		const band = (calibration: Calibration) => resistance([5000, 5000], calibration).uncertainty;
		expect(band(wild)).toBeGreaterThan(3 * band(even));
	});

	it('weighs a sure reading more than an unsure one', () => {
		const ohm = resistance([5000, 5000]).value;
		const both = [kept([5000, 5000], ohm * 1.01, 0.002, 0), kept([5000, 5000], ohm * 0.97, 0.05, 0)];
		const { coils, scale } = value(calibrate(model, both));
		expect(coils[0]!.share).toBeGreaterThan(0.9);
		expect(coils[0]!.share + coils[1]!.share).toBeCloseTo(1, 12);
		expect(scale).toBeGreaterThan(1.004);
	});

	it('by a poor reading hardly moves a model that is surer', () => {
		const ohm = resistance([5000, 5000]).value;
		const { keptShare, scale } = value(calibrate(model, [kept([5000, 5000], ohm * 1.1, 0.2, 0)]));
		expect(keptShare).toBeLessThan(0.1);
		expect(scale).toBeLessThan(1.01);
	});

	it('takes a wrong diameter out of the next coil, and leaves what it did to the first', () => {
		const calibration = value(calibrate(model, [kept([4950, 4850], 7330)]));
		const part = (figure: ReturnType<typeof resistance>, name: string) =>
			figure.parts.find((each) => each.name === name)?.uncertainty ?? 0;
		const before = resistance([5207, 5107]);
		const after = resistance([5207, 5107], calibration);
		for (const name of ['diameter', 'packing', 'overallDiameter', 'bobbin'])
			expect(part(after, name)).toBeLessThan(part(before, name) / 5);
		// The further from the turns it was calibrated at, the more the packing tells again.
		expect(part(resistance([8000, 8000], calibration), 'packing')).toBeGreaterThan(part(after, 'packing'));
	});

	it('is one factor above zero, so that resistance grows with turns whatever was measured', () => {
		fc.assert(
			fc.property(
				fc.array(fc.tuple(fc.integer({ min: 1000, max: 9000 }), fc.double({ min: 0.75, max: 1.35, noNaN: true })), {
					minLength: 1,
					maxLength: 8
				}),
				fc.integer({ min: 500, max: 9000 }),
				(coils, turns) => {
					const measured = coils.map(([count, off]) => kept([count], off * resistance([count]).value));
					const calibration = value(calibrate(model, measured));
					expect(calibration.scale).toBeGreaterThan(0);
					const here = resistance([turns], calibration).value;
					expect(resistance([turns + 1], calibration).value).toBeGreaterThan(here);
					expect(here / resistance([turns]).value).toBeCloseTo(calibration.scale, 9);
				}
			),
			{ numRuns: 25 }
		);
	});

	it('lies between the model and the coils', () => {
		const { scale, keptShare } = value(calibrate(model, [kept([4950, 4850], 7330)]));
		const ratio = 7330 / resistance([4950, 4850]).value;
		expect(scale).toBeGreaterThan(1);
		expect(scale).toBeLessThan(ratio);
		expect(keptShare).toBeGreaterThan(0.95);
	});

	it('of no coil, or of one that is open, shorted or of other wire, is refused', () => {
		expect(calibrate(model, [])).toMatchObject({ ok: false, field: 'kept.length', min: 1 });
		expect(calibrate(model, [kept([5000], 200)])).toMatchObject({ ok: false, field: 'kept[0].ohmAt20C' });
		expect(calibrate(model, [kept([5000], 3700), kept([NaN], 3700)])).toMatchObject({ field: 'kept[1].turns[0]' });
		const sure = { ...kept([5000], 3700), meterOhm: 100 };
		expect(calibrate(model, [sure])).toMatchObject({ field: 'kept[0].meterOhm' });
	});
});
