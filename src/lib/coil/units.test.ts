import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { quantities, shownNumber, shownValue, typedValue, type Quantity, type UnitOf } from './units.ts';
import { awgDiameterM } from './wire.ts';

describe('a value as people type it', () => {
	it.each<[string, Quantity, string, number]>([
		['0,063', 'wireDiameter', 'mm', 63e-6],
		['.063 mm', 'wireDiameter', 'awg', 63e-6],
		['42 AWG', 'wireDiameter', 'mm', awgDiameterM(42)],
		['AWG 42', 'wireDiameter', 'mm', awgDiameterM(42)],
		['awg42', 'wireDiameter', 'mm', awgDiameterM(42)],
		['42', 'wireDiameter', 'awg', awgDiameterM(42)],
		['2.5 thou', 'wireDiameter', 'mm', 63.5e-6],
		['2.5 mils', 'wireDiameter', 'mm', 63.5e-6],
		['63 µm', 'wireDiameter', 'mm', 63e-6],
		['50,8 mm', 'length', 'inch', 0.0508],
		['2"', 'length', 'mm', 0.0508],
		['2 in', 'length', 'mm', 0.0508],
		['3 m', 'length', 'mm', 3],
		["10'", 'length', 'mm', 3.048],
		['7.5k', 'resistance', 'ohm', 7500],
		['7k5', 'resistance', 'ohm', 7500],
		['7K5', 'resistance', 'ohm', 7500],
		['4R7', 'resistance', 'kilohm', 4.7],
		['7,5 kΩ', 'resistance', 'ohm', 7500],
		['7.5 KOhm', 'resistance', 'ohm', 7500],
		['1M', 'resistance', 'ohm', 1e6],
		['1M5', 'resistance', 'ohm', 1.5e6],
		['500 kΩ', 'resistance', 'ohm', 500_000],
		['7 500', 'resistance', 'ohm', 7500],
		['7\u00a0500 Ω', 'resistance', 'ohm', 7500],
		['1.234,5', 'resistance', 'ohm', 1234.5],
		['1,234.5', 'resistance', 'ohm', 1234.5],
		['1,234,567 Ω', 'resistance', 'ohm', 1_234_567],
		['7.331', 'resistance', 'kilohm', 7331],
		['68 °F', 'temperature', 'celsius', 20],
		['68f', 'temperature', 'celsius', 20],
		['−5', 'temperature', 'celsius', -5],
		['293.15 K', 'temperature', 'celsius', 20],
		['22n', 'capacitance', 'picofarad', 22e-9],
		['4n7', 'capacitance', 'picofarad', 4.7e-9],
		['0.022 uF', 'capacitance', 'picofarad', 22e-9],
		['500', 'capacitance', 'picofarad', 500e-12],
		['2,5 H', 'inductance', 'henry', 2.5],
		['1 lb', 'mass', 'gram', 0.45359237],
		['22.2 g', 'force', 'gramForce', 0.21770763],
		['1659.3945 Ω/1000 ft', 'ohmPerLength', 'ohmPerM', 5.44420768],
		['4.2 kHz', 'frequency', 'hertz', 4200],
		['80 %', 'part', 'one', 0.8],
		['0.8', 'part', 'one', 0.8]
	])('"%s" is read', (text, quantity, preferred, si) => {
		const typed = typedValue(text, quantity, preferred as never);
		if (!typed.ok) throw new Error(typed.why);
		expect(Math.abs(typed.value / si - 1)).toBeLessThan(1e-8);
	});

	it.each<[string, Quantity, string, string]>([
		['', 'length', 'mm', 'number'],
		['mm', 'length', 'mm', 'number'],
		['NaN', 'length', 'mm', 'number'],
		['Infinity', 'length', 'mm', 'number'],
		['1e9', 'length', 'mm', 'number'],
		['0x10', 'length', 'mm', 'number'],
		['1.2.3', 'length', 'mm', 'number'],
		['1,23,456', 'resistance', 'ohm', 'number'],
		['1,2.3,4', 'resistance', 'ohm', 'number'],
		['--5', 'temperature', 'celsius', 'number'],
		['5 kg', 'length', 'mm', 'unit'],
		['7f5', 'length', 'mm', 'number'],
		['7x5', 'resistance', 'ohm', 'unit'],
		['42 AWG', 'length', 'mm', 'unit'],
		['1/4', 'length', 'inch', 'unit'],
		// Seven and a half thousand, or seven and a half with three digits: both are usual.
		['7,500', 'resistance', 'ohm', 'two-meanings'],
		['7,500 Ω', 'resistance', 'ohm', 'two-meanings']
	])('"%s" is not guessed at', (text, quantity, preferred, why) => {
		expect(typedValue(text, quantity, preferred as never)).toEqual({ ok: false, why });
	});

	it('a capital tells mega from milli and metre', () => {
		expect(typedValue('1 MΩ', 'resistance', 'ohm')).toEqual({ ok: true, value: 1e6 });
		expect(typedValue('1 mH', 'inductance', 'henry')).toEqual({ ok: true, value: 0.001 });
		expect(typedValue('1 m', 'length', 'mm')).toEqual({ ok: true, value: 1 });
	});

	it('is stored as exactly what it says, without the dust of a factor', () => {
		expect(typedValue('0.063', 'wireDiameter', 'mm')).toEqual({ ok: true, value: 0.000063 });
		expect(typedValue('6.2', 'length', 'mm')).toEqual({ ok: true, value: 0.0062 });
		expect(typedValue('110', 'capacitance', 'picofarad')).toEqual({ ok: true, value: 110e-12 });
	});
});

describe('a value as it is shown', () => {
	it.each<[number, Quantity, string, number, string]>([
		[63e-6, 'wireDiameter', 'mm', 6, '0.063 mm'],
		[awgDiameterM(42), 'wireDiameter', 'awg', 6, 'AWG 42'],
		[7331.4, 'resistance', 'kilohm', 3, '7.33 kΩ'],
		[7500, 'resistance', 'ohm', 3, '7500 Ω'],
		[20, 'temperature', 'fahrenheit', 4, '68 °F'],
		[0, 'temperature', 'celsius', 4, '0 °C'],
		[-0.00001, 'temperature', 'celsius', 1, '-0.00001 °C'],
		[500e-12, 'capacitance', 'picofarad', 3, '500 pF'],
		[0.8, 'part', 'percent', 3, '80 %'],
		[0.8, 'part', 'one', 3, '0.8']
	])('%f as %s in %s to %i digits is "%s"', (si, quantity, unit, digits, text) => {
		expect(shownValue(si, quantity, unit as never, digits)).toBe(text);
	});

	it('that is none is a dash', () => {
		expect(shownValue(0, 'wireDiameter', 'mm')).toBe('0 mm');
		expect(shownNumber(Infinity, 'length', 'mm')).toBe('–');
	});
});

describe('there and back', () => {
	const every = Object.entries(quantities).flatMap(([quantity, units]) =>
		Object.keys(units).map((unit) => [quantity, unit] as [Quantity, string])
	);

	it.each(every)('%s in %s: what was typed is what is shown', (quantity, unit) => {
		fc.assert(
			fc.property(fc.integer({ min: 1, max: 999_999 }), fc.integer({ min: 0, max: 4 }), (digits, places) => {
				// Gauges beyond 60 are thinner than any number is shown.
				const typed = unit === 'awg' ? 1 + (digits % 6000) / 100 : digits / 10 ** places;
				const text = String(typed);
				const read = typedValue(text, quantity, unit as never);
				if (!read.ok) throw new Error(`${text}: ${read.why}`);
				expect(Number(shownNumber(read.value, quantity, unit as never))).toBeCloseTo(typed, 5);
				// And with its unit, whichever unit the reader prefers.
				const first = Object.keys(quantities[quantity])[0] as never;
				const again = typedValue(shownValue(read.value, quantity, unit as UnitOf<Quantity> as never), quantity, first);
				// A bare part has no unit to say.
				if (unit === 'one') return;
				if (!again.ok) throw new Error(`${shownValue(read.value, quantity, unit as never)}: ${again.why}`);
				expect(Math.abs(again.value - read.value)).toBeLessThanOrEqual(1e-5 * Math.abs(read.value) + 1e-12);
			}),
			{ numRuns: 60 }
		);
	});

	it('whatever is typed is read as a finite number or refused', () => {
		fc.assert(
			fc.property(
				fc.oneof(fc.string(), fc.stringMatching(/^[-+−]?[\d.,' ]{1,12} ?[a-zA-ZµΩ°"/%]{0,5}$/)),
				fc.constantFrom(...every),
				(text, [quantity, unit]) => {
					const read = typedValue(text, quantity, unit as never);
					if (read.ok) expect(Number.isFinite(read.value)).toBe(true);
				}
			),
			{ numRuns: 500 }
		);
	});
});
