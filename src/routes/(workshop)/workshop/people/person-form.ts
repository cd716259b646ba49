import { z } from 'zod';
import type { NewPerson } from '$lib/server/db/people';
import type { Role } from '$lib/server/db/schema';

/** The database holds names to 80 characters and addresses to 254 (RFC 5321, 4.5.3.1.3, less the brackets). */
export const nameCharactersMax = 80;
export const emailCharactersMax = 254;

const roles = ['owner', 'maker', 'apprentice'] as const satisfies readonly Role[];

export interface PersonTyped {
	name: string;
	email: string;
	role: string;
}

export type PersonReasons = Partial<Record<keyof PersonTyped, string>>;

export type PersonRead = { ok: true; person: NewPerson } | { ok: false; typed: PersonTyped; reasons: PersonReasons };

export function readName(typed: string): { ok: true; value: string } | { ok: false; reason: string } {
	// Control and invisible formatting characters could make two names look the same or a line run backwards.
	const value = typed
		.normalize('NFC')
		.replace(/[\p{Cc}\p{Cf}\p{Zl}\p{Zp}]+/gu, ' ')
		.replace(/\s+/g, ' ')
		.trim();
	if (value === '') return { ok: false, reason: 'Give a name; it stands on every run of this person.' };
	if ([...value].length > nameCharactersMax) {
		return {
			ok: false,
			reason: `A name has at most ${nameCharactersMax} characters; this one has ${[...value].length}.`
		};
	}
	return { ok: true, value };
}

export function readRole(typed: string): Role | null {
	return roles.find((role) => role === typed) ?? null;
}

export function readPerson(form: FormData): PersonRead {
	const text = (name: string) => String(form.get(name) ?? '');
	const typed: PersonTyped = { name: text('name'), email: text('email').trim(), role: text('role') };
	const name = readName(typed.name);
	const email = z.email().max(emailCharactersMax).safeParse(typed.email.toLowerCase());
	const role = readRole(typed.role);
	if (name.ok && email.success && role) return { ok: true, person: { name: name.value, email: email.data, role } };
	const reasons: PersonReasons = {};
	if (!name.ok) reasons.name = name.reason;
	if (!email.success) reasons.email = 'This is no e-mail address. It should look like ada@hollow-lane.example.';
	if (!role) reasons.role = 'Choose owner, maker or apprentice.';
	return { ok: false, typed, reasons };
}
