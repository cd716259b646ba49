import { describe, expect, it } from 'vitest';
import { newWinderTyped, parseWinderForm, typedOf, type WinderTyped } from './winder-form.server.ts';

function parse(typed: Partial<WinderTyped>) {
	const form = new FormData();
	for (const [key, value] of Object.entries({ ...newWinderTyped, name: 'w-01', ...typed })) form.set(key, value);
	return parseWinderForm(form);
}

describe('the settings of a winder', () => {
	it('as first offered are sensible', () => {
		expect(parse({})).toEqual({
			ok: true,
			value: {
				name: 'w-01',
				pulsesPerTurn: 1,
				rpmMax: 2000,
				seesDirection: false,
				forwardIs: 'counter-clockwise',
				easeEarlyTurns: 40,
				stopEarlyTurns: 3,
				keepAfterS: null
			}
		});
	});

	it('come back to the form as they were', () => {
		const parsed = parse({ keepAfterS: '30 s', rpmMax: '1 500 rpm', seesDirection: 'yes' });
		expect(parsed.ok).toBe(true);
		if (!parsed.ok) return;
		expect(parsed.value).toMatchObject({ keepAfterS: 30, rpmMax: 1500, seesDirection: true });
		expect(parseWinderForm(formOf(typedOf(parsed.value)))).toEqual(parsed);
	});

	it.each([
		['rpmMax', '0', 'Highest speed: 10 to 20,000 rpm; “0” was kept as typed.'],
		['pulsesPerTurn', '', 'Pulses per turn: 1 to 1,000; nothing was typed.'],
		['keepAfterS', '2', 'Keep by itself after: 5 to 600 seconds, or empty for never; “2” was kept as typed.'],
		['stopEarlyTurns', '50', 'Stop early by: 0 to 40 turns, no more than ease off; “50” was kept as typed.'],
		['name', 'a name of seventeen', 'Name: 1 to 16 characters; 19 were kept as typed.'],
		['forwardIs', 'left', 'Turning forward: counter-clockwise ↺ or clockwise ↻; choose one.']
	] as const)('with %s "%s" are refused with the limit', (field, value, message) => {
		const parsed = parse({ [field]: value });
		expect(parsed.ok).toBe(false);
		if (parsed.ok) return;
		expect(parsed.errors).toEqual({ [field]: message });
		expect(parsed.typed[field]).toBe(value);
	});

	it('with "never" never keep by themselves', () => {
		expect(parse({ keepAfterS: 'never' })).toMatchObject({ ok: true, value: { keepAfterS: null } });
	});
});

function formOf(typed: WinderTyped): FormData {
	const form = new FormData();
	for (const [key, value] of Object.entries(typed)) form.set(key, value);
	return form;
}
