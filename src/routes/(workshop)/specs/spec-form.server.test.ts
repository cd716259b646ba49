import { describe, expect, it } from 'vitest';
import { usualUnits } from '../../../lib/coil/units.ts';
import { specFields, writeSpec, type SpecTyped } from '../../../lib/spec/form.ts';
import { startingSpec } from '../../../lib/spec/start.ts';
import { readPosted } from './spec-form.server.ts';

const base = startingSpec('two-coils', 'Evening bridge');

function posted(fields: Partial<SpecTyped & { why: string; units: string; scripted: string }>) {
	const form = new FormData();
	for (const [name, text] of Object.entries(fields)) form.set(name, text);
	return readPosted(form, usualUnits, base);
}
const whole = { ...writeSpec(base, usualUnits), scripted: 'yes' };

describe('a posted spec', () => {
	it('is what the form showed where nothing was changed', () => {
		const read = posted(whole);
		expect(read.ok && read.content).toEqual(base);
	});

	it('keeps what a form does not hold', () => {
		const read = posted({ scripted: 'yes', coil1Turns: '4 950' });
		expect(read.ok && read.content).toEqual({ ...base, coils: [{ ...base.coils[0]!, turns: 4950 }, base.coils[1]!] });
	});

	it('is read in the units it was written in, whatever the person prefers since', () => {
		const inches = { ...usualUnits, length: 'inch' as const };
		const typed = {
			...writeSpec(base, inches),
			bobbinTraverse: '0.25',
			scripted: 'yes',
			units: JSON.stringify(inches)
		};
		const read = posted(typed);
		expect(read.ok && read.content.bobbin.traverseM).toBeCloseTo(0.00635, 12);
		expect(read.ok && read.content.bobbin.straightM).toBe(base.bobbin.straightM);
	});

	it.each(['{', '"mm"', '{"length":"furlong"}'])('with the units %s is read in the person’s own', (units) => {
		const read = posted({ ...whole, bobbinTraverse: '6.3', units });
		expect(read.ok && read.content.bobbin.traverseM).toBeCloseTo(0.0063, 12);
	});

	it('without scripts has the figures of what was chosen', () => {
		const read = posted({ ...whole, scripted: '', coverKey: 'brass' });
		expect(read.ok && read.content.load.lossOhm).toBe(250e3);
		const scripted = posted({ ...whole, coverKey: 'brass' });
		expect(scripted.ok && scripted.content.load.lossOhm).toBe(base.load.lossOhm);
	});

	it('refused gives every text back as it was typed', () => {
		const read = posted({ ...whole, coil2Turns: 'many', bobbinTraverse: '1,234', notes: ' as  typed ' });
		if (read.ok) throw new Error('it was taken');
		expect(Object.keys(read.errors).sort()).toEqual(['bobbinTraverse', 'coil2Turns']);
		for (const field of specFields) {
			const sent: Partial<SpecTyped> = { coil2Turns: 'many', bobbinTraverse: '1,234', notes: ' as  typed ' };
			expect(read.typed[field], field).toBe(sent[field] ?? whole[field]);
		}
	});

	it('is refused where the computation has no answer', () => {
		const read = posted({ ...whole, coilSpacing: '2' });
		expect(!read.ok && read.errors.coilSpacing).toMatch(/at least/);
	});

	it('is refused with a reason longer than is kept', () => {
		const read = posted({ ...whole, why: 'x'.repeat(501) });
		expect(!read.ok && read.whyError).toBe('What changed, and why: up to 500 characters; 501 were kept as typed.');
		expect(read.why).toHaveLength(501);
	});
});
