import { describe, expect, it } from 'vitest';
import good from '../../firmware-protocol/vectors/good.json' with { type: 'json' };
import { parseLine } from '../lib/turnline/index.ts';
import { run } from './line.ts';

async function line(args: string[], input: string[] | null = null) {
	const out: string[] = [];
	const err: string[] = [];
	const code = await run(args, input, { out: (text) => out.push(text), err: (text) => err.push(text) });
	return { code, out, err: err.join('\n') };
}

const tick = 'T b=5C0E91A7 n=2 e=1 f=1 v=0 r=58 t=1040';

describe('npm run line', () => {
	it('adds the checksum', async () => {
		expect(await line([tick])).toEqual({ code: 0, out: [`${tick} ~C2D9`], err: '' });
	});

	it('gives every line of the vectors its checksum, from arguments and from standard input', async () => {
		const texts = good.written.map(({ text }) => text);
		const bare = texts.map((text) => text.slice(0, -6));
		expect(await line(bare)).toEqual({ code: 0, out: texts, err: '' });
		expect(await line([], ['# a comment', '', ...bare])).toEqual({ code: 0, out: texts, err: '' });
	});

	it('leaves a line that has the right checksum as it is, and refuses a wrong one', async () => {
		expect((await line([`${tick} ~C2D9`])).out).toEqual([`${tick} ~C2D9`]);
		expect(await line([`${tick} ~C2D8`])).toMatchObject({
			code: 1,
			out: [],
			err: expect.stringMatching(/checksum is wrong/)
		});
	});

	it('keeps the keys in the order they were typed', async () => {
		const [text] = (await line(['T t=1040 r=58 v=0 f=1 e=1 n=2 b=5C0E91A7 temp=21'])).out;
		expect(text).toMatch(/^T t=1040 .* temp=21 ~[0-9A-F]{4}$/);
		expect(parseLine(text!).ok).toBe(true);
	});

	it('says which line is wrong and what is wrong with it, and prints the others', async () => {
		const { code, out, err } = await line([tick, tick.replace('r=58 ', ''), tick.replace('f=1', 'f=+5')]);
		expect(code).toBe(1);
		expect(out).toHaveLength(1);
		expect(err).toMatch(/^line 2: refused: T: the key "r" is missing\nline 3: refused: T: "f" must be a whole number/);
	});

	it('checks a line without changing it', async () => {
		expect((await line(['--check', `${tick} ~C2D9`])).out[0]).toMatch(/^right: \{"verb":"T"/);
		expect(await line(['--check', tick])).toMatchObject({
			code: 1,
			out: [],
			err: expect.stringMatching(/^refused, no-checksum: /)
		});
		expect((await line(['--check', '123456789 ~31C3'])).err).toMatch(/looks like XMODEM: start value must be FFFF/);
	});

	it('asks for quotes when the shell has cut the line up', async () => {
		expect(await line(tick.split(' '))).toMatchObject({ code: 2, out: [], err: expect.stringMatching(/in quotes/) });
	});

	it('explains itself, and refuses an option it does not have', async () => {
		expect((await line(['--help'])).out.join()).toContain('--check');
		expect(await line([])).toMatchObject({ code: 2, err: expect.stringContaining('--help') });
		expect(await line(['--crc', tick])).toMatchObject({
			code: 2,
			out: [],
			err: expect.stringMatching(/no option --crc/)
		});
	});
});
