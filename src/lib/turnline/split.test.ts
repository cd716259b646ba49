import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { newSplitter } from './split.ts';

const bytes = (text: string) => Uint8Array.from(text, (char) => char.charCodeAt(0));

describe('splitting bytes into lines', () => {
	it('a line comes when its LF comes', () => {
		const splitter = newSplitter();
		expect(splitter.push(bytes('T b=5C'))).toEqual([]);
		expect(splitter.push(bytes('0E\nHI'))).toEqual(['T b=5C0E']);
		expect(splitter.push(bytes('\r\n\n'))).toEqual(['HI\r', '']);
	});

	it('a line of 160 bytes with LF passes, one more is dropped to its LF and counted once', () => {
		const splitter = newSplitter();
		expect(splitter.push(bytes(`${'a'.repeat(159)}\n${'b'.repeat(160)}\nok\n`))).toEqual(['a'.repeat(159), 'ok']);
		expect(splitter.dropped).toEqual({ tooLong: 1, notAscii: 0 });
	});

	it('a NUL or a byte over 7F drops its line and no other', () => {
		const splitter = newSplitter();
		expect(splitter.push(bytes('a\nb\0\xff\nc\nd\x80d\ne\n'))).toEqual(['a', 'c', 'e']);
		expect(splitter.dropped).toEqual({ tooLong: 0, notAscii: 2 });
	});

	it('chunks cut anywhere give what the whole gives', () => {
		const byte = fc.oneof(
			{ weight: 20, arbitrary: fc.integer({ min: 0x20, max: 0x7e }) },
			{ weight: 1, arbitrary: fc.constantFrom(0x0a, 0x0d) },
			{ weight: 1, arbitrary: fc.integer({ min: 0, max: 255 }) }
		);
		const stream = fc.array(byte, { maxLength: 900 });
		fc.assert(
			fc.property(stream, fc.array(fc.nat(900), { maxLength: 20 }), (all, cuts) => {
				const whole = newSplitter();
				const texts = whole.push(Uint8Array.from(all));
				const parts = newSplitter();
				const edges = [0, ...cuts.filter((cut) => cut < all.length).sort((a, b) => a - b), all.length];
				const cutTexts = edges.slice(1).flatMap((end, i) => parts.push(Uint8Array.from(all.slice(edges[i], end))));
				expect(cutTexts).toEqual(texts);
				expect(parts.dropped).toEqual(whole.dropped);
			})
		);
	});

	it('megabytes without a line end are one dropped line, and the next line is read', () => {
		const splitter = newSplitter();
		const noise = new Uint8Array(65_536).fill(0x55);
		for (let i = 0; i < 64; i++) expect(splitter.push(noise)).toEqual([]);
		expect(splitter.push(bytes('\nT ok\n'))).toEqual(['T ok']);
		expect(splitter.dropped).toEqual({ tooLong: 1, notAscii: 0 });
	});
});
