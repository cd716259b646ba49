import { randomUUID } from 'node:crypto';
import { describe, expect, it } from 'vitest';
import { usualUnits, type UnitPreference } from '../../../../lib/coil/units.ts';
import { blankReading, noMeter, parseReadingForm, type ReadingTyped } from './reading-form.server.ts';

const id = randomUUID();
const range = (upToOhm: number) => ({ upToOhm, percent: 0.8, counts: 2, ohmPerCount: upToOhm / 2000 });
const meter = { id: randomUUID(), name: 'Bench meter', ranges: [range(2_000), range(20_000)] };
const american: UnitPreference = { ...usualUnits, length: 'inch', temperature: 'fahrenheit', resistance: 'ohm' };

function parse(part: Partial<ReadingTyped>, units = usualUnits) {
	const form = new FormData();
	for (const [field, text] of Object.entries({ ...blankReading(units, id, meter.id), ...part })) {
		if (field !== 'open' || text !== '') form.set(field, text);
	}
	return parseReadingForm(form, units, [meter]);
}
function valueOf(part: Partial<ReadingTyped>, units = usualUnits) {
	const parsed = parse(part, units);
	if (!parsed.ok) throw new Error(JSON.stringify(parsed.errors));
	return parsed.value;
}
function errorsOf(part: Partial<ReadingTyped>, units = usualUnits) {
	const parsed = parse(part, units);
	return parsed.ok ? {} : parsed.errors;
}

describe('the form of a reading', () => {
	it('takes a resistance on the meter’s own range, at the usual temperature', () => {
		expect(valueOf({ value: '7,48', stage: 'tape', note: ' after lunch ' })).toEqual({
			id,
			kind: 'resistance',
			stage: 'tape',
			value: 7_480,
			temperatureC: 20,
			temperatureHalfWidthC: 1,
			meterId: meter.id,
			meterRange: range(20_000),
			halfWidth: null,
			note: 'after lunch'
		});
		expect(valueOf({ value: '1480 Ω' }).meterRange).toEqual(range(2_000));
	});

	it('takes bare numbers in the person’s own units', () => {
		const value = valueOf({ value: '7480', temperature: '77', temperatureHalf: '1.8' }, american);
		expect(value.value).toBe(7_480);
		expect(value.temperatureC).toBeCloseTo(25, 9);
		expect(value.temperatureHalfWidthC).toBeCloseTo(1, 9);
		expect(valueOf({ value: '7480', temperatureHalf: '2 K' }, american).temperatureHalfWidthC).toBe(2);
	});

	it('takes “no reading” in place of a number, and not both', () => {
		expect(valueOf({ open: 'yes' })).toMatchObject({
			value: null,
			meterId: meter.id,
			meterRange: null,
			halfWidth: null
		});
		expect(errorsOf({ open: 'yes', value: '7.48' })).toHaveProperty('value');
		expect(errorsOf({ open: 'yes', what: 'outer-width' })).toHaveProperty('open');
		expect(errorsOf({}).value).toContain('no reading');
	});

	it('refuses a number beyond every range of the meter, and says what it reads', () => {
		expect(errorsOf({ value: '7480' }).value).toBe(
			'Value: “Bench meter” reads up to 20 kΩ; “7480” was kept as typed. If it showed no number, tick “no reading”.'
		);
	});

	it('wants a ± where there is no meter: in the value’s unit or in per cent', () => {
		const half = (text: string, part: Partial<ReadingTyped> = {}) =>
			valueOf({ value: '8', meter: noMeter, half: text, ...part }).halfWidth;
		expect(half('0.05')).toBe(50);
		expect(half('50 Ω')).toBe(50);
		expect(half('1 %')).toBe(80);
		expect(half('0.1', { what: 'outer-width', value: '9.5' })).toBeCloseTo(0.0001, 12);
		expect(half('2 %', { what: 'inductance', value: '4' })).toBe(0.08);
		for (const text of ['', 'some', '9 kΩ', '-1']) {
			expect(errorsOf({ value: '8', meter: noMeter, half: text })).toHaveProperty('half');
		}
		expect(errorsOf({ what: 'outer-width', value: '9.5', half: '10' })).toHaveProperty('half');
	});

	it('asks no temperature and no meter of what is no resistance', () => {
		const width = valueOf({ what: 'outer-width', value: '9.5', half: '0.1', temperature: '' });
		expect(width).toMatchObject({ value: 0.0095, temperatureC: null, meterId: null, meterRange: null });
	});

	it('names each field that is wrong and keeps what was typed', () => {
		const typed = { value: '7.48 V', temperature: '900', temperatureHalf: '80', stage: 'never', meter: randomUUID() };
		const parsed = parse(typed);
		expect(parsed).toMatchObject({ ok: false, typed });
		expect(Object.keys(errorsOf(typed)).sort()).toEqual(['meter', 'stage', 'temperature', 'temperatureHalf', 'value']);
		expect(errorsOf({ value: '7', what: 'colour' })).toHaveProperty('what');
		expect(errorsOf({ value: '7', note: 'x'.repeat(501) })).toHaveProperty('note');
		expect(errorsOf({ value: '7', id: 'none' })).toHaveProperty('id');
	});
});
