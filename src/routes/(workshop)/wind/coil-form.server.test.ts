import { describe, expect, it } from 'vitest';
import { emptyCoil, parseCoilForm, type CoilTyped } from './coil-form.server.ts';

function parse(typed: Partial<CoilTyped>) {
	const form = new FormData();
	for (const [key, value] of Object.entries({ ...emptyCoil, name: 'Bridge · screw coil', target: '5320', ...typed })) {
		form.set(key, value);
	}
	return parseCoilForm(form);
}

function errorsOf(typed: Partial<CoilTyped>) {
	const parsed = parse(typed);
	return parsed.ok ? {} : parsed.errors;
}

describe('the form of what to wind', () => {
	it('reads numbers as people write them', () => {
		for (const target of ['5320', '5,320', '5 320', '5,320 turns']) {
			expect(parse({ target, alike: '4' })).toEqual({
				ok: true,
				value: {
					coil: {
						name: 'Bridge · screw coil',
						target: 5320,
						lookEvery: 500,
						direction: 'counter-clockwise',
						topFaces: 'out',
						note: '',
						toleranceTurns: 5
					},
					alike: 4
				}
			});
		}
	});

	it.each([
		['0', 'Target: 1 to 100,000 turns; “0” was kept as typed.'],
		['', 'Target: 1 to 100,000 turns; nothing was typed.'],
		['1000000000', 'Target: 1 to 100,000 turns; “1000000000” was kept as typed.'],
		['10⁹', 'Target: 1 to 100,000 turns; “10⁹” was kept as typed.'],
		['-5', 'Target: 1 to 100,000 turns; “-5” was kept as typed.'],
		['100,001', 'Target: 1 to 100,000 turns; “100,001” was kept as typed.']
	])('refuses the target "%s" with the range and what was kept', (target, message) => {
		expect(errorsOf({ target, lookEvery: '0' })).toEqual({ target: message });
	});

	it('refuses a look interval above the target', () => {
		expect(errorsOf({ target: '300' })).toEqual({
			lookEvery: 'Look interval: 0 for none, or 10 to 300 turns, no more than the target; “500” was kept as typed.'
		});
	});

	it('takes 0 for no looks, and an interval equal to the target', () => {
		expect(parse({ lookEvery: '0' }).ok).toBe(true);
		expect(parse({ lookEvery: '5,320' }).ok).toBe(true);
	});

	it('names every field at fault at once and keeps all that was typed', () => {
		const parsed = parse({
			name: '  ',
			target: 'lots',
			lookEvery: '3',
			direction: 'up',
			alike: '13',
			note: 'x'.repeat(501)
		});
		expect(parsed.ok).toBe(false);
		if (parsed.ok) return;
		expect(Object.keys(parsed.errors).sort()).toEqual(['alike', 'direction', 'lookEvery', 'name', 'note', 'target']);
		expect(parsed.typed).toMatchObject({ target: 'lots', lookEvery: '3', alike: '13' });
	});

	it('measures a name of emoji by what is seen', () => {
		expect(parse({ name: '🧲'.repeat(80) }).ok).toBe(true);
		expect(errorsOf({ name: '🧲'.repeat(81) }).name).toBe('Name: 1 to 80 characters; 81 were kept as typed.');
	});

	it('does not ask how many when one coil is edited', () => {
		const form = new FormData();
		const { alike: _, ...one } = { ...emptyCoil, name: 'Neck', target: '7600' };
		for (const [key, value] of Object.entries(one)) form.set(key, value);
		expect(parseCoilForm(form)).toMatchObject({ ok: true, value: { alike: 1 } });
	});

	it('refuses a field sent as a file or left out', () => {
		const form = new FormData();
		form.set('name', new File(['x'], 'x.txt'));
		expect(parseCoilForm(form).ok).toBe(false);
	});
});
