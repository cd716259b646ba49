import { parseOptions } from '@node-rs/argon2';
import { describe, expect, it } from 'vitest';
import { commonPasswords } from './common-passwords.ts';
import { hashPassword, refusePassword, verifyPassword } from './passwords.ts';

const about = ['ada.quill@hollow-lane.example', 'Ada Quill', 'Hollow Lane workshop', 'hollow-lane'];

describe('choosing a password', () => {
	it.each([
		['copper kettle on the hob', null],
		['fourteen chars', 'too-short'],
		['fifteen chars..', null],
		['ä'.normalize('NFD').repeat(14), 'too-short'],
		['👩‍🔧 hums', 'too-short'],
		['kettle '.repeat(18) + 'ab', 'repeats'],
		['x'.repeat(129), 'too-long'],
		['Password12345678', 'common'],
		['this is my password', 'common'],
		['aaaaaaaaaaaaaaaaaaaa', 'repeats'],
		['heronheronheron26', 'repeats'],
		['kettlekettlekettle', 'repeats'],
		['123123123123123', 'repeats'],
		['ababcabcbabcbabcba', 'repeats'],
		['abcdefghijklmnop', 'sequence'],
		['qwertyuiopasdfgh', 'sequence'],
		['1qaz2wsx3edc4rfv', 'sequence'],
		['9876543210abcdef', 'sequence'],
		['zyxwvutsrqponmlk!', 'sequence'],
		['ada.quill@hollow-lane.example', 'about-you'],
		['Hollow Lane workshop 26', 'about-you'],
		['AdaQuill-Turnstead', 'about-you'],
		['Ada Quill keeps a grey heron', null]
	])('%s: %s', (password, refusal) => expect(refusePassword(password, about)).toBe(refusal));

	it('every entry of the list is one that length alone would let through', () => {
		const wrong = [...commonPasswords].filter((entry) => [...entry].length < 15 || entry !== entry.toLowerCase());
		expect(wrong).toEqual([]);
		expect(commonPasswords.size).toBeGreaterThan(200);
	});
	it('every entry of the list is refused', () => {
		for (const entry of commonPasswords) expect(refusePassword(entry.toUpperCase(), []), entry).toBe('common');
	});
});

describe('keeping a password', () => {
	it('is argon2id with 19 MiB, two passes and one lane', async () => {
		const kept = await hashPassword('copper kettle on the hob');
		expect(kept).toMatch(/^\$argon2id\$v=19\$/);
		expect(parseOptions(kept)).toMatchObject({ memoryCost: 19_456, timeCost: 2, parallelism: 1, saltLen: 16 });
	});
	it('the same password typed composed and decomposed is the same', async () => {
		const kept = await hashPassword('caf\u00e9 au lait, s\u2019il vous pla\u00eet');
		expect(await verifyPassword(kept, 'cafe\u0301 au lait, s\u2019il vous plai\u0302t')).toBe(true);
	});
	it('capitals matter', async () => {
		const kept = await hashPassword('copper kettle on the hob');
		expect(await verifyPassword(kept, 'copper kettle on the hob')).toBe(true);
		expect(await verifyPassword(kept, 'Copper kettle on the hob')).toBe(false);
	});
	it('nobody has a password that was never chosen', async () => {
		expect(await verifyPassword(null, '')).toBe(false);
	});
	it('a text too long to be a password is never right', async () => {
		const long = 'kettle and hob, '.repeat(40);
		expect(await verifyPassword(await hashPassword(long), long)).toBe(false);
	});
});
