import { describe, expect, it } from 'vitest';
import { usualUnits } from '../../../../lib/coil/units.ts';
import { parseMeterForm, typedOf, usualMeter, type MeterTyped } from './meter-form.server.ts';

function form({ name, ranges }: MeterTyped): FormData {
	const data = new FormData();
	data.set('name', name);
	ranges.forEach((range, i) => {
		for (const [field, text] of Object.entries(range)) data.set(`${field}-${i}`, text);
	});
	return data;
}
const blank = { upTo: '', percent: '', counts: '', digit: '' };
const parse = (typed: MeterTyped, units = usualUnits) => parseMeterForm(form(typed), units);
const errorsOf = (typed: MeterTyped) => {
	const parsed = parse(typed);
	return parsed.ok ? {} : parsed.errors;
};

describe('the form of a meter', () => {
	it('starts with ranges that it takes back as they are', () => {
		const parsed = parse({ ...usualMeter, name: 'Bench meter' });
		if (!parsed.ok) throw new Error(JSON.stringify(parsed.errors));
		expect(parsed.value.ranges).toEqual([
			{ upToOhm: 2_000, percent: 0.8, counts: 2, ohmPerCount: 1 },
			{ upToOhm: 20_000, percent: 0.8, counts: 2, ohmPerCount: 10 },
			{ upToOhm: 200_000, percent: 0.8, counts: 2, ohmPerCount: 100 }
		]);
		expect(typedOf(parsed.value)).toEqual({ ...usualMeter, name: 'Bench meter' });
	});

	it('reads what people type, bare ranges in the person’s own unit, and passes over empty rows', () => {
		const ranges = [blank, { upTo: '20', percent: '0,5 %', counts: '3 digits', digit: '10' }, blank];
		for (const [resistance, upToOhm] of [
			['kilohm', 20_000],
			['ohm', 20]
		] as const) {
			expect(parse({ name: 'Bench meter', ranges }, { ...usualUnits, resistance })).toEqual({
				ok: true,
				value: { name: 'Bench meter', ranges: [{ upToOhm, percent: 0.5, counts: 3, ohmPerCount: 10 }] }
			});
		}
	});

	it('names each field that is wrong and keeps what was typed', () => {
		const typed = { name: ' ', ranges: [{ upTo: '2 V', percent: '30', counts: 'two', digit: '' }] };
		const parsed = parse(typed);
		expect(parsed).toMatchObject({ ok: false, typed });
		expect(Object.keys(errorsOf(typed)).sort()).toEqual(['counts-0', 'digit-0', 'name', 'percent-0', 'upTo-0']);
	});

	it('refuses no range at all, the same range twice and a count wider than its range', () => {
		const range = { upTo: '2 kΩ', percent: '1', counts: '2', digit: '1 Ω' };
		expect(errorsOf({ name: 'A', ranges: [] })).toHaveProperty('upTo-0');
		expect(errorsOf({ name: 'A', ranges: [range, { ...range, upTo: '2000 Ω' }] })).toHaveProperty('upTo-1');
		expect(errorsOf({ name: 'A', ranges: [{ ...range, digit: '3 kΩ' }] })).toHaveProperty('digit-0');
	});
});
