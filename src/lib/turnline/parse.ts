/** Text to typed line. Nothing here throws, whatever the text. */
import { crc16Ibm3740, crc16Kermit, crc16Xmodem, crcText } from './crc.ts';
import { readBody } from './form.ts';
import { fits, misfit, verbs, type KeySpec, type VerbSpec } from './keys.ts';
import { lineBytesMax } from './limits.ts';
import type { DeviceLine, HostLine, Line, Parsed, Refusal } from './types.ts';

export type Refused = Extract<Parsed, { ok: false }>;

const notVisible = /[^ -~]/;
const checksumEnd = / ~[0-9A-F]{4}$/;
// One number has one spelling: no plus, no leading zero, no minus zero, no exponent. 10 digits hold u32 and i32.
const integerForm = /^(?:0|-?[1-9][0-9]{0,9})$/;

/**
 * Any line of either side. `text` is one line without or with its LF; a CR before it is ignored.
 * An empty line or a comment (`#…`) is `{ ok: true, line: null }`.
 */
export function parseLine(text: string): Parsed<Line> {
	return parse(text, null) as Parsed<Line>;
}

/** A line a winder sent. A host's verb is an unknown verb here, as it must never be acted on by the host. */
export function parseDeviceLine(text: string): Parsed<DeviceLine> {
	return parse(text, 'device') as Parsed<DeviceLine>;
}

/** A line the host sent. A device's verb is an unknown verb here. */
export function parseHostLine(text: string): Parsed<HostLine> {
	return parse(text, 'host') as Parsed<HostLine>;
}

function parse(text: string, side: VerbSpec['side'] | null): Parsed<unknown> {
	if (text.endsWith('\n')) text = text.slice(0, -1);
	if (text.length > lineBytesMax - 1) return refuse('too-long');
	if (text.endsWith('\r')) text = text.slice(0, -1);
	if (notVisible.test(text)) return refuse('not-ascii');
	if (text === '' || text.startsWith('#')) return { ok: true, line: null };

	const summed = checksumEnd.test(text);
	const body = summed ? text.slice(0, -6) : text;
	if (summed) {
		const why = checksumFault(body, text.slice(-4));
		if (why) return refuse(why);
	} else if (text.includes('~')) return refuse('form', '~');

	const words = readBody(body);
	if (!words.ok) return words;
	const spec = verbs.get(words.verb);
	if (!summed && !spec?.bare) return refuse('no-checksum', undefined, words.verb);
	return typed(words.verb, side, (key) => {
		const value = words.values.get(key.key);
		return value !== undefined && key.form.kind === 'integer' && integerForm.test(value) ? Number(value) : value;
	});
}

function checksumFault(body: string, given: string): Refusal | null {
	if (given === crcText(crc16Ibm3740(body))) return null;
	if (given === crcText(crc16Xmodem(body))) return 'checksum-xmodem';
	if (given === crcText(crc16Kermit(body))) return 'checksum-kermit';
	return 'checksum';
}

/** The typed line of a verb, its values asked for key by key; keys the verb does not know are never asked for. */
export function typed(
	verb: string,
	side: VerbSpec['side'] | null,
	valueOf: (key: KeySpec) => unknown
): Parsed<unknown> {
	const spec = verbs.get(verb);
	if (!spec || (side && spec.side !== side)) return refuse('verb', undefined, verb);
	const line: Record<string, unknown> = { verb };
	for (const key of spec.keys) {
		const value = valueOf(key);
		if (value === undefined) {
			if (key.required) return refuse('missing-key', key.key, verb);
			continue;
		}
		if (!fits(key.form, value)) return refuse('range', key.key, verb);
		line[key.key] = value;
	}
	const together = misfit(verb, line);
	return together ? refuse(together.why, together.key, verb) : { ok: true, line };
}

export function refuse(why: Refusal, key?: string, verb?: string): Refused {
	return { ok: false, why, ...(key !== undefined && { key }), ...(verb !== undefined && { verb }) };
}
