import { execFileSync } from 'node:child_process';
import { describe, expect, it } from 'vitest';
import { parseLine, withChecksum } from '../../../../../lib/turnline/index.ts';
import { curlRecipe } from './recipe.ts';

const boot = '5C0E91A7';

/** What the shell makes of it: npm and curl stand in as functions that print what they were given. */
function run(script: string): string[] {
	const input = `npm() { shift 4; printf '%s\\n' "$@"; }\ncurl() { cat; printf '<%s>\\n' "$@"; }\n${script}\n`;
	return execFileSync('sh', [], { encoding: 'utf8', input }).trimEnd().split('\n');
}

describe('the curl recipe', () => {
	it('is a script a POSIX shell can read', () => {
		const script = curlRecipe("http://bench.local:4173/it's", 'aa', boot, "k'ey");
		expect(() => execFileSync('sh', ['-n'], { input: script })).not.toThrow();
	});

	it('gives the shell exactly this address and key, whatever they hold', () => {
		const said = run(curlRecipe('http://bench.local:4173', 'aa', boot, "k'e$y"));
		expect(said).toContain("<Authorization: Bearer k'e$y>");
		expect(said).toContain('<http://bench.local:4173/api/v1/winders/aa/lines>');
	});

	it('sends lines of one boot that turn nothing and end with a goodbye', () => {
		const said = run(curlRecipe('http://bench.local:4173', 'aa', boot, null)).filter((line) => !line.startsWith('<'));
		const lines = said.map((text) => parseLine(withChecksum(text)));
		expect(lines).toMatchObject([
			{ ok: true, line: { verb: 'HI', b: boot, f: 0, v: 0 } },
			{ ok: true, line: { verb: 'T', b: boot, f: 0, v: 0, r: 0 } },
			{ ok: true, line: { verb: 'BYE', b: boot } }
		]);
	});
});
