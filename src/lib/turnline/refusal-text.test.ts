import { describe, expect, it } from 'vitest';
import refused from '../../../firmware-protocol/vectors/refused.json' with { type: 'json' };
import { verbs } from './keys.ts';
import { refusalText } from './refusal-text.ts';
import { refusals } from './types.ts';

describe('the words for a refused line', () => {
	it('every reason has its own', () => {
		expect(new Set(refusals.map((why) => refusalText(why))).size).toBe(refusals.length);
	});

	it('a foreign checksum is named, with what is wrong about it', () => {
		expect(refusalText('checksum-xmodem')).toBe('looks like XMODEM: start value must be FFFF');
		expect(refusalText('checksum-kermit')).toMatch(/^looks like KERMIT: .*FFFF.*not reflected/);
	});

	it.each(refused.filter(({ key }) => key && key !== '~'))('$note: names the key', ({ why, key }) => {
		expect(refusalText(why as (typeof refusals)[number], key)).toContain(`"${key}"`);
	});

	it('a value outside its range is told the range', () => {
		expect(refusalText('range', 'r')).toMatch(/from -32768 to 32767/);
		expect(refusalText('range', 'n')).toMatch(/from 0 to 4294967295.*from 1 on T and E/);
		expect(refusalText('range', 'b')).toMatch(/8 hex digits in upper case/);
		expect(refusalText('range', 'p')).toMatch(/version 1/);
		for (const { keys } of verbs.values())
			for (const { key } of keys) expect(refusalText('range', key)).not.toBe(refusalText('range'));
	});
});
