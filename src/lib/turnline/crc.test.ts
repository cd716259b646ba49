import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import vectors from '../../../firmware-protocol/vectors/crc.json' with { type: 'json' };
import { crc16Ibm3740, crc16Kermit, crc16Xmodem, crcText } from './crc.ts';

const variants: Record<string, (text: string) => number> = {
	'CRC-16/IBM-3740': crc16Ibm3740,
	'CRC-16/XMODEM': crc16Xmodem,
	'CRC-16/KERMIT': crc16Kermit
};

/** The definition, bit by bit, without a table. */
function bitByBit(text: string): number {
	let crc = 0xffff;
	for (const char of text)
		for (let bit = 7; bit >= 0; bit--) {
			const out = (crc >> 15) ^ ((char.charCodeAt(0) >> bit) & 1);
			crc = ((crc << 1) & 0xffff) ^ (out ? 0x1021 : 0);
		}
	return crc;
}

describe('checksums', () => {
	it.each(vectors.values)('$variant of "$text" is $crc ($source)', ({ variant, text, crc }) => {
		expect(crcText(variants[variant]!(text))).toBe(crc);
	});

	it('the table gives what the definition gives', () => {
		const ascii = fc.string({ unit: fc.integer({ min: 0, max: 127 }).map((code) => String.fromCharCode(code)) });
		fc.assert(fc.property(ascii, (text) => crc16Ibm3740(text) === bitByBit(text)));
	});

	it('a small checksum keeps its four digits', () => {
		expect(crcText(0x0a)).toBe('000A');
	});
});
