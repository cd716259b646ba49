/** Plain sentences for people about a refused line. */
import { verbs, type ValueForm } from './keys.ts';
import { jsonLineCharsMax, lineBytesMax, protocolVersion, valueCharsMax, wordCharsMax } from './limits.ts';
import type { Refusal } from './types.ts';

/** Why a line was refused and what to do, as one sentence without a full stop. `key` is the key at fault, where one is. */
export function refusalText(refusal: Refusal, key?: string): string {
	switch (refusal) {
		case 'too-long':
			return `longer than ${lineBytesMax} bytes with its line end (as JSON ${jsonLineCharsMax} characters): shorten it, or check that lines end with LF`;
		case 'not-ascii':
			return 'holds a character that is not visible ASCII: check the speed of the port (115200) and the cable';
		case 'form':
			return formText(key);
		case 'no-checksum':
			return 'has no checksum: add a space, ~ and 4 hex digits (only ? and STOP may go without)';
		case 'checksum':
			return 'the checksum is wrong: the line changed on its way, or it was computed over more or less than the text before " ~"';
		case 'checksum-xmodem':
			return 'looks like XMODEM: start value must be FFFF';
		case 'checksum-kermit':
			return 'looks like KERMIT: start value must be FFFF and the bits are not reflected';
		case 'verb':
			return 'the verb is not known here: HI, T, E, OK, NO and BYE come from a winder, the others go to it';
		case 'duplicate-key':
			return `${named(key)} stands twice: say it once`;
		case 'missing-key':
			return `${named(key)} is missing${['pb', 'pf', 'pv'].includes(key ?? '') ? ': pb, pf and pv come together or not at all' : ''}`;
		case 'range':
			return rangeText(key);
	}
}

const named = (key?: string) => (key ? `the key "${key}"` : 'a key');

function formText(key?: string): string {
	if (key === '~') return 'the checksum must be a space, ~ and 4 hex digits in upper case at the end of the line';
	if (key === 'verb') return 'as JSON a line is one flat object with "verb"';
	if (key) return `the value of "${key}" must be 1 to ${valueCharsMax} visible ASCII characters without space or ~`;
	return 'is not VERB key=value key=value: one space between, verb of 1 to 4 capitals, keys of 1 to 4 small letters';
}

function rangeText(key?: string): string {
	if (key === 'p') return `"p" must be ${protocolVersion}: this side speaks version ${protocolVersion} of the line`;
	if (key === 'tgt')
		return `"tgt" must be ${formWords(formsOf('tgt')[0]!)} and differ from the coil's zero ("from", 0 when absent)`;
	const forms = key ? formsOf(key) : [];
	if (!key || forms.length === 0) return 'a value is outside its range';
	// n and e start at 1 where they number the line itself: the widest range is said.
	const widest = forms.reduce((a, b) => (a.kind === 'integer' && b.kind === 'integer' && b.min < a.min ? b : a));
	const own = key === 'n' ? ', from 1 on T and E' : key === 'e' ? ', from 1 on E' : '';
	return `"${key}" must be ${formWords(widest)}${own}`;
}

function formsOf(key: string): ValueForm[] {
	return [...verbs.values()].flatMap(({ keys }) => keys.filter((spec) => spec.key === key).map((spec) => spec.form));
}

function formWords(form: ValueForm): string {
	if (form.kind === 'boot') return '8 hex digits in upper case';
	if (form.kind === 'word') return `a word of 1 to ${wordCharsMax} characters`;
	return `a whole number from ${form.min} to ${form.max}, without plus sign, leading zeros or exponent`;
}
