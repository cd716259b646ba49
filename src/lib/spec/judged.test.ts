import { describe, expect, it } from 'vitest';
import { calibrate } from '../coil/calibrate.ts';
import { coverage } from '../coil/measurement.ts';
import { windCoil } from '../coil/winding.ts';
import {
	expectedCoil,
	nextStep,
	packingOf,
	permeabilityOf,
	rangeOfReading,
	readAt20C,
	sideOf,
	verdictOf,
	type ResistanceRead
} from './judged.ts';
import { predictCoil, specModel } from './model.ts';
import { startingSpec, tableWire } from './start.ts';

const content = startingSpec('two-coils', 'Evening bridge');
const turns = 5_000;

function value<T>(result: { ok: true; value: T } | { ok: false }): T {
	if (!result.ok) throw new Error(`refused: ${JSON.stringify(result)}`);
	return result.value;
}

const meter = { upToOhm: 20_000, percent: 0.8, counts: 2, ohmPerCount: 10 };
const read = (ohm: number | null, part: Partial<ResistanceRead> = {}): ResistanceRead => ({
	ohm,
	temperatureC: 20,
	temperatureHalfWidthC: 1,
	range: meter,
	halfWidthOhm: null,
	...part
});

describe('what a coil is expected to measure', () => {
	it('is what the prediction says, less what the temperature adds to it', () => {
		const kept = [
			{
				turns: [4_900],
				connection: 'single' as const,
				ohmAt20C: 1.02 * value(expectedCoil(content, 4_900)).ohm,
				uncertaintyOhm: 20,
				meterOhm: 15
			}
		];
		for (const calibration of [null, value(calibrate(specModel(content), kept))]) {
			const expected = value(expectedCoil(content, turns, { calibration }));
			const { resistanceOhm } = value(predictCoil(content, turns, { calibration })).figures;
			const temperature = resistanceOhm.parts.find((part) => part.name === 'temperature')!.uncertainty;
			expect(expected.ohm).toBeCloseTo(resistanceOhm.value, 6);
			expect(Math.hypot(expected.uncertaintyOhm, temperature)).toBeCloseTo(resistanceOhm.uncertainty, 6);
			expect(expected.toOhm - expected.ohm).toBeCloseTo(coverage * expected.uncertaintyOhm, 9);
		}
	});

	it('follows the wire of the spool', () => {
		const thinner = tableWire('awg-43', 'single');
		expect(value(expectedCoil(content, turns, { wire: thinner })).ohm).toBeGreaterThan(
			1.1 * value(expectedCoil(content, turns)).ohm
		);
	});

	it('is refused where turns make no sense', () => {
		expect(expectedCoil(content, 100_000)).toMatchObject({ ok: false, field: 'turns[0]' });
	});
});

describe('a reading', () => {
	const expected = { ohm: 4_000, uncertaintyOhm: 40 };
	const agreementOf = (reading: ResistanceRead) => value(verdictOf(reading, expected)).agreement;

	it('is compared at 20 °C', () => {
		// 4,000 Ω at 20 °C are 4,393 Ω at 45 °C by 0.00393 per kelvin (IEC 60028).
		expect(agreementOf(read(4_393, { temperatureC: 45 }))).toBe('within');
		expect(agreementOf(read(4_393))).toBe('above');
		expect(agreementOf(read(3_600))).toBe('below');
	});

	it('beyond every range is open, and next to nothing is a short', () => {
		expect(readAt20C(read(null))).toEqual({ ok: true, value: null });
		expect(agreementOf(read(null))).toBe('open');
		expect(agreementOf(read(0))).toBe('short');
		expect(agreementOf(read(0.4))).toBe('short');
	});

	it('without a meter is as sure as was typed, and without either one per cent', () => {
		expect(rangeOfReading({ range: null, halfWidthOhm: 25 })).toMatchObject({ counts: 1, ohmPerCount: 25, percent: 0 });
		expect(rangeOfReading({ range: null, halfWidthOhm: null })).toMatchObject({ percent: 1, counts: 0 });
		expect(rangeOfReading({ range: meter, halfWidthOhm: 25 })).toBe(meter);
	});

	it('says what to do next', () => {
		expect(nextStep('within', 'wound')).toBe('Solder the leads on, then read it again.');
		expect(nextStep('open', 'wound')).not.toBe(nextStep('open', 'leads'));
		expect(nextStep('above', 'wound')).toBeNull();
	});
});

describe('width and inductance of a wound coil', () => {
	it('give back the packing and the cores they were reckoned with', () => {
		const wound = value(windCoil({ ...specModel(content), turns, temperatureC: 20 }));
		expect(value(packingOf(content, null, turns, wound.outerWidthM))).toBeCloseTo(content.packing.value, 9);
		const { coils } = value(predictCoil(content, turns));
		expect(value(permeabilityOf(content, null, turns, coils[0]!.inductanceH))).toBeCloseTo(
			content.cores.effectivePermeability,
			9
		);
	});

	it('stand within, above or below the predicted one by the ± of both', () => {
		// Twice the root of 3² + 4² is 10.
		const predicted = { value: 100, uncertainty: 3 };
		expect(sideOf(110, 4, predicted)).toEqual({ agreement: 'within', off: 10 });
		expect(sideOf(110.1, 4, predicted).agreement).toBe('above');
		expect(sideOf(89.9, 4, predicted).agreement).toBe('below');
	});

	it('are refused where nothing explains them', () => {
		expect(packingOf(content, null, turns, 0.001).ok).toBe(false);
		expect(permeabilityOf(content, null, turns, 1e3).ok).toBe(false);
	});
});
