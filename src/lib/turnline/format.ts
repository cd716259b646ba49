/** Typed line to text. */
import { crc16Ibm3740, crcText } from './crc.ts';
import { fits, misfit, verbs } from './keys.ts';
import { lineBytesMax } from './limits.ts';
import type { Line } from './types.ts';

/**
 * The line as it goes on the wire: keys in the order of PROTOCOL.md, with its checksum, without LF.
 * Throws a RangeError naming the key when a value is missing or outside its range: no typed line from `parse…` is.
 */
export function formatLine(line: Line): string {
	return withChecksum(formatBody(line));
}

/** A body with its checksum added: ` ~` and 4 hex digits. */
export function withChecksum(body: string): string {
	return `${body} ~${crcText(crc16Ibm3740(body))}`;
}

function formatBody(line: Line): string {
	const values = line as unknown as Record<string, unknown>;
	let body: string = line.verb;
	for (const { key, form, required } of verbs.get(line.verb)!.keys) {
		const value = values[key];
		if (value === undefined && !required) continue;
		if (!fits(form, value)) throw new RangeError(`${line.verb} ${key}=${String(value)} is no value of Turnline`);
		body += ` ${key}=${value === 0 ? 0 : String(value)}`;
	}
	const together = misfit(line.verb, values);
	if (together) throw new RangeError(`${line.verb}: ${together.key} does not fit its other keys`);
	// The checksum takes 6 bytes, the LF one.
	if (body.length + 7 > lineBytesMax) throw new RangeError(`${line.verb}: longer than ${lineBytesMax} bytes`);
	return body;
}
