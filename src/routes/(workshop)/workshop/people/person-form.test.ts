import { describe, expect, it } from 'vitest';
import { readName, readPerson } from './person-form.ts';

function form(fields: Record<string, string>): FormData {
	const data = new FormData();
	for (const [name, value] of Object.entries(fields)) data.set(name, value);
	return data;
}

describe('a person typed in', () => {
	it('is read generously and stored plainly', () => {
		const read = readPerson(form({ name: '  Bo   Reed ', email: ' Bo@Hollow-Lane.example ', role: 'maker' }));
		expect(read).toEqual({ ok: true, person: { name: 'Bo Reed', email: 'bo@hollow-lane.example', role: 'maker' } });
	});
	it('refused, keeps all that was typed and names each field', () => {
		const read = readPerson(form({ name: ' ', email: 'bo at hollow lane', role: 'boss' }));
		expect(read).toMatchObject({
			ok: false,
			typed: { name: ' ', email: 'bo at hollow lane', role: 'boss' },
			reasons: { name: expect.any(String), email: expect.any(String), role: expect.any(String) }
		});
	});
	it('an empty form is refused, not an error', () => {
		expect(readPerson(new FormData()).ok).toBe(false);
	});
	it('a name cannot run backwards or hide a line', () => {
		expect(readName('Bo\u202eReed\n')).toEqual({ ok: true, value: 'Bo Reed' });
	});
	it('a name of 80 characters fits, one of 81 does not', () => {
		expect([readName('é'.repeat(80)).ok, readName('é'.repeat(81)).ok]).toEqual([true, false]);
	});
});
