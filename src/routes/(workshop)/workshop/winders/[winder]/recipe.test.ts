import { execFileSync } from 'node:child_process';
import { describe, expect, it } from 'vitest';
import { curlRecipe } from './recipe.ts';

describe('the curl recipe', () => {
	it('is a script a POSIX shell can read', () => {
		const script = curlRecipe("http://bench.local:4173/it's", 'aa', "k'ey");
		expect(() => execFileSync('sh', ['-n'], { input: script })).not.toThrow();
	});

	it('gives the shell exactly this address and key, whatever they hold', () => {
		const script = curlRecipe('http://bench.local:4173', 'aa', "k'e$y");
		// npm and curl stand in as functions that print what they were given.
		const said = execFileSync('sh', [], {
			encoding: 'utf8',
			input: `npm() { printf '%s\\n' "$5"; }\ncurl() { cat; for word; do printf '<%s>\\n' "$word"; done; }\n${script}\n`
		});
		const boot = /^HI p=1 dev=by-hand b=([0-9A-F]{8}) /.exec(said)?.[1];
		expect(boot).toBeDefined();
		expect(said).toContain(`E b=${boot} n=1 e=1 f=0 v=0 t=40 k=go\nT b=${boot} n=2 e=1 f=1 v=0 r=60 t=1040\n`);
		expect(said).toContain("<Authorization: Bearer k'e$y>");
		expect(said).toContain('<http://bench.local:4173/api/v1/winders/aa/lines>');
	});
});
