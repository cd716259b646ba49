import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import good from '../../../firmware-protocol/vectors/good.json' with { type: 'json' };
import { verbs } from './keys.ts';
import { parseJsonLine } from './parse-json.ts';

const tick = { verb: 'T', b: '5C0E91A7', n: 2, e: 1, f: 1, v: 0, r: 58, t: 1040 };
const read = (changes: object) => parseJsonLine(JSON.stringify({ ...tick, ...changes }));

describe('reading a line as JSON', () => {
	it.each(good.written.filter(({ line }) => verbs.get(line.verb)!.side === 'device'))('reads: $text', ({ line }) => {
		expect(parseJsonLine(JSON.stringify(line))).toEqual({ ok: true, line });
	});

	it('ignores empty lines, comments and unknown keys', () => {
		expect(parseJsonLine(' \r')).toEqual({ ok: true, line: null });
		expect(parseJsonLine('# bench 2')).toEqual({ ok: true, line: null });
		expect(read({ temp: 'warm', hum: 0.5 })).toEqual({ ok: true, line: tick });
	});

	it('refuses what the text line refuses', () => {
		expect(read({ f: -1 })).toEqual({ ok: false, why: 'range', key: 'f', verb: 'T' });
		expect(read({ f: 1.5 })).toMatchObject({ why: 'range', key: 'f' });
		expect(read({ f: 4294967296 })).toMatchObject({ why: 'range', key: 'f' });
		expect(read({ r: -32769 })).toMatchObject({ why: 'range', key: 'r' });
		expect(read({ f: '1' })).toMatchObject({ why: 'range', key: 'f' });
		expect(read({ b: 50 })).toMatchObject({ why: 'range', key: 'b' });
		expect(read({ b: '5c0e91a7' })).toMatchObject({ why: 'range', key: 'b' });
		expect(read({ r: undefined })).toMatchObject({ why: 'missing-key', key: 'r' });
		expect(read({ verb: 'ACK' })).toEqual({ ok: false, why: 'verb', verb: 'ACK' });
	});

	it('refuses what is not one flat object of numbers and short words', () => {
		for (const text of ['7', 'null', '[]', '"T"', '{}', '{', '{"verb":7}', '{"verb":"t"}'])
			expect(parseJsonLine(text), text).toMatchObject({ ok: false, why: 'form' });
		for (const value of [null, true, {}, [1], '', 'two words', '~', 'é', 'x'.repeat(41)])
			expect(read({ q: value }), String(value)).toMatchObject({ ok: false, why: 'form', key: 'q' });
		expect(read({ Speed: 1 })).toMatchObject({ ok: false, why: 'form' });
		expect(parseJsonLine('{"verb":"T","__proto__":1}')).toMatchObject({ ok: false, why: 'form' });
	});

	it('a key that comes twice refuses the line, also when one is spelt with an escape', () => {
		const text = JSON.stringify(tick);
		expect(parseJsonLine(text.replace('"f":1', '"f":9,"f":1'))).toMatchObject({ ok: false, why: 'duplicate-key' });
		expect(parseJsonLine(text.replace('"f":1', '"\\u0066":9,"f" : 1'))).toMatchObject({ why: 'duplicate-key' });
		expect(parseJsonLine(text.replace('"verb"', '"verb":"E","verb"'))).toMatchObject({ why: 'duplicate-key' });
	});

	it('a value that looks like a key is no second key', () => {
		expect(parseJsonLine(JSON.stringify({ ...tick, q: '":"f":' }))).toEqual({ ok: true, line: tick });
	});

	it('minus zero is zero', () => {
		const parsed = parseJsonLine(JSON.stringify(tick).replace('"r":58', '"r":-0'));
		expect(parsed).toEqual({ ok: true, line: { ...tick, r: 0 } });
	});

	it('a line of more than 512 characters is refused', () => {
		expect(parseJsonLine(JSON.stringify(tick) + ' '.repeat(512))).toEqual({ ok: false, why: 'too-long' });
	});

	it('random text and random JSON never throw', () => {
		fc.assert(
			fc.property(fc.oneof(fc.string({ unit: 'binary' }), fc.json()), (text) => {
				expect(typeof parseJsonLine(text).ok).toBe('boolean');
			}),
			{ numRuns: 500 }
		);
	});
});
