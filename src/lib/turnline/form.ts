/** The grammar of a line's body, before any key has a meaning. */
import { keyCharsMax, valueCharsMax, verbCharsMax } from './limits.ts';
import type { Refusal } from './types.ts';

const verbForm = new RegExp(`^(?:\\?|[A-Z]{1,${verbCharsMax}})$`);
const keyForm = new RegExp(`^[a-z]{1,${keyCharsMax}}$`);
// Visible ASCII is ! to ~; the tilde is left out because it opens the checksum.
const valueForm = new RegExp(`^[!-}]{1,${valueCharsMax}}$`);

export const isKey = (text: string): boolean => keyForm.test(text);
export const isValue = (text: string): boolean => valueForm.test(text);
export const isVerb = (text: string): boolean => verbForm.test(text);

export type Words =
	| { ok: true; verb: string; values: Map<string, string> }
	| { ok: false; why: Extract<Refusal, 'form' | 'duplicate-key'>; key?: string; verb?: string };

/** `verb *( SP key "=" value )` with exactly one space between; values stay text. */
export function readBody(body: string): Words {
	const [verb = '', ...pairs] = body.split(' ');
	if (!isVerb(verb)) return { ok: false, why: 'form' };
	const values = new Map<string, string>();
	for (const pair of pairs) {
		const at = pair.indexOf('=');
		const key = pair.slice(0, Math.max(at, 0));
		if (at < 1 || !isKey(key)) return { ok: false, why: 'form', verb };
		if (!isValue(pair.slice(at + 1))) return { ok: false, why: 'form', key, verb };
		if (values.has(key)) return { ok: false, why: 'duplicate-key', key, verb };
		values.set(key, pair.slice(at + 1));
	}
	return { ok: true, verb, values };
}
