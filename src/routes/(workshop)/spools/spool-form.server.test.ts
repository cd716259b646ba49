import { describe, expect, it } from 'vitest';
import { usualUnits } from '../../../lib/coil/units.ts';
import { tableWire } from '../../../lib/spec/start.ts';
import { newSpool, parseSpoolForm, typedSpool, type SpoolTyped } from './spool-form.server.ts';

const formOf = (typed: Partial<SpoolTyped>) => {
	const form = new FormData();
	for (const [name, value] of Object.entries({ ...newSpool(usualUnits), ...typed })) form.set(name, value);
	return form;
};
const parse = (typed: Partial<SpoolTyped>) => parseSpoolForm(formOf(typed), usualUnits, null);

describe('a spool that is typed', () => {
	it('needs no more than a name', () => {
		expect(parse({ name: ' Red reel ' })).toMatchObject({
			ok: true,
			value: { name: 'Red reel', lot: '', note: '', wire: tableWire('awg-42', 'single') }
		});
	});

	it('takes what was measured on it, in the unit it was typed in', () => {
		expect(parse({ name: 'Red reel', wireOhmPerM: '5,4' })).toMatchObject({ value: { wire: { ohmPerM: 5.4 } } });
		const perFoot = parse({ name: 'Red reel', wireOhmPerM: '1.65 Ω/ft' });
		expect(perFoot.ok && perFoot.value.wire.ohmPerM).toBeCloseTo(1.65 / 0.3048, 9);
	});

	it('is refused what no wire of its diameter measures, with the range and what was typed', () => {
		const parsed = parse({ name: 'Red reel', wireOhmPerM: '54' });
		if (parsed.ok) throw new Error('taken');
		// AWG 42 by the law: 0.0633 mm, 5.47 Ω/m; 0.7 and 1.4 times that.
		expect(parsed.errors.wireOhmPerM).toContain('3.83 Ω/m to 7.66 Ω/m');
		expect(parsed.errors.wireOhmPerM).toContain('“54” was kept as typed');
		expect(parsed.typed.wireOhmPerM).toBe('54');
	});

	it('names every field at fault at once, and gives all back as typed', () => {
		const parsed = parse({ name: '', lot: 'x'.repeat(81), wireOverall: 'thick' });
		if (parsed.ok) throw new Error('taken');
		expect(Object.keys(parsed.errors).sort()).toEqual(['lot', 'name', 'wireOverall']);
		expect(parsed.typed).toMatchObject({ wireOverall: 'thick', wireSize: 'awg-42' });
	});

	it('of another size chosen without scripts gets the table’s figures', () => {
		const parsed = parse({ name: 'Fine', wireSize: 'awg-44' });
		expect(parsed).toMatchObject({ ok: true, value: { wire: tableWire('awg-44', 'single') } });
	});

	it('keeps its exact figures when it is changed and they are not', () => {
		const wire = { ...tableWire('awg-42', 'single'), ohmPerM: 5.4123456789, overallDiameterM: 0.0000712345678 };
		const spool = { id: '', name: 'Red', lot: '', note: '', wire, createdAt: new Date(), endedAt: null, coils: 0 };
		const form = new FormData();
		for (const [name, value] of Object.entries(typedSpool(spool, usualUnits))) form.set(name, value);
		form.set('note', 'Nearly empty.');
		expect(parseSpoolForm(form, usualUnits, wire)).toMatchObject({ ok: true, value: { note: 'Nearly empty.', wire } });
	});
});
