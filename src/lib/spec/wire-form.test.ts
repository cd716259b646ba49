import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { anyUnits, anyWire } from '../../../tests/spec-arbitrary.ts';
import type { UnitPreference } from '../coil/units.ts';
import { awgDiameterM } from '../coil/wire.ts';
import { specWire } from './content.ts';
import { tableWire } from './start.ts';
import { fillChosenWire, fillWire, readWire, wireMeasures, writeWire } from './wire-form.ts';

const metric: UnitPreference = {
	length: 'mm',
	wireDiameter: 'mm',
	temperature: 'celsius',
	resistance: 'kilohm',
	mass: 'gram'
};
const gauges: UnitPreference = { ...metric, wireDiameter: 'awg' };

describe('a wire in a form', () => {
	it('comes back exactly as it was stored, in any units', () => {
		fc.assert(
			fc.property(anyWire, anyUnits, (wire, units) => {
				expect(specWire.parse(wire)).toEqual(wire);
				expect(readWire(writeWire(wire, units), units, wire)).toEqual({ ok: true, wire });
			})
		);
	});

	it('comes back to six digits when what it was is not known', () => {
		fc.assert(
			fc.property(anyWire, anyUnits, (wire, units) => {
				const read = readWire(writeWire(wire, units), units, null);
				const back = read.ok ? read.wire : read.partial;
				expect(back.diameterM / wire.diameterM).toBeCloseTo(1, 4);
				expect(back.overallDiameterM / wire.overallDiameterM).toBeCloseTo(1, 4);
				if (wire.ohmPerM !== null) expect(back.ohmPerM! / wire.ohmPerM).toBeCloseTo(1, 4);
			})
		);
	});

	it('of the table has the table’s exact figures behind its texts', () => {
		const typed = fillWire({ ...writeWire(tableWire('mm-0.063', 'grade 1'), metric), wireSize: 'awg-43' }, metric);
		expect(typed.wireGrade).toBe('single');
		// ASTM B258: d = 0.127 mm · 92^((36 − 43)/39).
		expect(readWire(typed, metric, null)).toEqual({ ok: true, wire: tableWire('awg-43', 'single') });
	});

	it('is written by gauge for whoever prefers gauges, and other sizes with their unit', () => {
		expect(writeWire(tableWire('awg-42', 'single'), gauges).wireDiameter).toBe('AWG 42');
		expect(writeWire(tableWire('mm-0.063', 'grade 1'), gauges).wireDiameter).toBe('0.063 mm');
		expect(writeWire(tableWire('mm-0.063', 'grade 1'), { ...gauges, length: 'inch' }).wireOverall).toBe('0.00285433');
	});

	it.each([
		['0,063', 0.063e-3],
		['.063 mm', 0.063e-3],
		['42 AWG', awgDiameterM(42)],
		['2.5 thou', 2.5 * 25.4e-6]
	])('reads %s', (text, diameterM) => {
		const typed = { ...writeWire(tableWire('awg-42', 'single'), metric), wireDiameter: text, wireOverall: '0.08' };
		const read = readWire(typed, metric, tableWire('awg-42', 'single'));
		expect((read.ok ? read.wire : read.partial).diameterM).toBeCloseTo(diameterM, 12);
	});

	it.each([
		['42', awgDiameterM(42)],
		['AWG 43', awgDiameterM(43)],
		// No wire is that thick: a diameter is meant.
		['0.063', 0.063e-3],
		['0,2', 0.2e-3]
	])('reads a bare %s of whoever prefers gauges', (text, diameterM) => {
		const read = wireMeasures(gauges).wireDiameter.read(text);
		expect(read.ok && read.value).toBeCloseTo(diameterM, 12);
	});

	it('has a bare number that is neither gauge nor diameter as a gauge, to be refused', () => {
		const read = wireMeasures(gauges).wireDiameter.read('63');
		expect(read.ok && read.value).toBeCloseTo(awgDiameterM(63), 12);
	});

	it('is of no size of the table any more once its diameter is another', () => {
		const typed = { ...writeWire(tableWire('awg-42', 'single'), metric), wireDiameter: '0.0625' };
		const read = readWire(typed, metric, tableWire('awg-42', 'single'));
		expect(read.ok && read.wire.sizeKey).toBeNull();
	});

	it('takes the rounded inch figure of a gauge where that is chosen', () => {
		const before = writeWire(tableWire('awg-42', 'single'), { ...metric, wireDiameter: 'inch' });
		const typed = fillWire({ ...before, wireBasis: 'table' }, { ...metric, wireDiameter: 'inch' });
		expect(typed.wireDiameter).toBe('0.0025');
		const read = readWire(typed, { ...metric, wireDiameter: 'inch' }, tableWire('awg-42', 'single'));
		expect(read.ok && read.wire).toMatchObject({
			sizeKey: 'awg-42',
			diameterBasis: 'table',
			diameterM: 0.0025 * 0.0254
		});
	});

	it('sent without scripts is filled from the table when another size was chosen and the figures were left', () => {
		const base = tableWire('awg-42', 'single');
		const typed = writeWire(base, metric);
		expect(fillChosenWire({ ...typed, wireSize: 'awg-43' }, metric, base)).toEqual(
			writeWire(tableWire('awg-43', 'single'), metric)
		);
		const own = { ...typed, wireSize: 'awg-43', wireOverall: '0.0700' };
		expect(fillChosenWire(own, metric, base)).toEqual(own);
		expect(fillChosenWire(typed, metric, base)).toEqual(typed);
	});
});

describe('a wire refused', () => {
	const base = tableWire('awg-42', 'single');
	const refused = (change: Partial<Record<keyof ReturnType<typeof writeWire>, string>>, units = metric) => {
		const read = readWire({ ...writeWire(base, units), ...change }, units, base);
		if (read.ok) throw new Error('it was taken');
		return read;
	};

	it('names the field, the range in the person’s unit and what was kept', () => {
		expect(refused({ wireDiameter: '5' }).errors).toEqual({
			wireDiameter: 'Bare diameter: 0.01 to 2.1 mm; “5” was kept as typed.'
		});
		expect(refused({ wireOhmPerM: '0' }).errors.wireOhmPerM).toBe(
			'Measured at 20 °C: 0.001 to 1000 Ω/m, or empty for not measured; “0” was kept as typed.'
		);
		expect(refused({ wireOverall: '' }).errors.wireOverall).toBe('Overall diameter: 0.01 to 3 mm; nothing was typed.');
	});

	it('says of a text with two meanings which mark to use', () => {
		expect(refused({ wireOhmPerM: '1,234' }).errors.wireOhmPerM).toMatch(/comma in “1,234” may set off decimals/);
	});

	it('says of a unit that does not belong which does', () => {
		expect(refused({ wireOverall: '3 kg' }).errors.wireOverall).toMatch(/write it in mm/);
	});

	it('is thinner over its enamel than bare, or has least and greatest the wrong way round', () => {
		expect(refused({ wireOverall: '0.06' }).errors.wireOverall).toMatch(/at least the bare diameter, 0.06334 mm/);
		expect(refused({ wireOverallMin: '0.08' }).errors.wireOverallMin).toMatch(/no more than the overall diameter/);
		expect(refused({ wireOverallMax: '0.07' }).errors.wireOverallMax).toMatch(/at least the overall diameter/);
	});

	it('keeps the value before in what can be read of it', () => {
		expect(refused({ wireDiameter: 'x', wireOhmPerM: '5.4' }).partial).toEqual({ ...base, ohmPerM: 5.4 });
	});

	it('names bounds that are themselves taken', () => {
		fc.assert(
			fc.property(anyUnits, (units) => {
				for (const field of ['wireOverall', 'wireOhmPerM'] as const) {
					const { errors } = refused({ [field]: '-1' }, units);
					const [, least = '', greatest = ''] = /: ([\d.]+) to ([\d.]+)/.exec(errors[field]!) ?? [];
					const { read, range } = wireMeasures(units)[field];
					for (const text of [least, greatest]) {
						const back = read(text);
						if (!back.ok) throw new Error(`${field} ${text}`);
						expect(back.value).toBeGreaterThanOrEqual(range[0] * (1 - 1e-5));
						expect(back.value).toBeLessThanOrEqual(range[1] * (1 + 1e-5));
					}
				}
			})
		);
	});
});
