/** One line as a JSON text (`application/x-ndjson`): the same keys and ranges, plus `verb`; the transport is trusted. */
import { isKey, isValue, isVerb } from './form.ts';
import { jsonLineCharsMax } from './limits.ts';
import { refuse, typed } from './parse.ts';
import type { DeviceLine, Parsed } from './types.ts';

// In a flat object a string followed by a colon is a key, and nothing else is.
const strings = /"(?:[^"\\]|\\.)*"(\s*:)?/g;

/**
 * A line a winder sent as one flat JSON object: whole numbers as numbers, `b`, `pb` and words as strings. No checksum.
 * Empty text or a comment (`#…`) is `{ ok: true, line: null }`; text that is no such object is refused as `form`.
 */
export function parseJsonLine(text: string): Parsed<DeviceLine> {
	if (text.length > jsonLineCharsMax) return refuse('too-long');
	text = text.trim();
	if (text === '' || text.startsWith('#')) return { ok: true, line: null };

	let value: unknown;
	try {
		value = JSON.parse(text);
	} catch {
		return refuse('form');
	}
	if (typeof value !== 'object' || value === null || Array.isArray(value)) return refuse('form');

	const { verb, ...values } = value as Record<string, unknown>;
	if (typeof verb !== 'string' || !isVerb(verb)) return refuse('form', 'verb');
	for (const [key, held] of Object.entries(values)) {
		if (!isKey(key)) return refuse('form', undefined, verb);
		if (typeof held !== 'number' && !(typeof held === 'string' && isValue(held))) return refuse('form', key, verb);
	}
	// JSON.parse keeps the last of two equal keys in silence.
	const written = [...text.matchAll(strings)].filter((match) => match[1] !== undefined).length;
	if (written > Object.keys(values).length + 1) return refuse('duplicate-key', undefined, verb);

	return typed(verb, 'device', ({ key }) => {
		const held = Object.hasOwn(values, key) ? values[key] : undefined;
		// -0 is a JSON number; as a count it is 0.
		return held === 0 ? 0 : held;
	}) as Parsed<DeviceLine>;
}
