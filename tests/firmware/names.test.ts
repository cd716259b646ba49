import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { protocolVersion } from '../../src/lib/turnline/index.ts';
import { lookPassedAfterTurns, rearmTurns } from '../../src/lib/winding/cues.ts';
import { coreFolder } from './toolchain.ts';

const protocol = readFileSync(join(coreFolder, '..', 'PROTOCOL.md'), 'utf8');
const header = readFileSync(join(coreFolder, 'turnline.h'), 'utf8');
const readme = readFileSync(join(coreFolder, 'README.md'), 'utf8');

const defined = Object.fromEntries(
	[...header.matchAll(/^#define ([a-z]\w*) (\d+)$/gm)].map(([, name, value]) => [name!, Number(value)])
);
const table = (title: string) =>
	Object.fromEntries(
		[
			...protocol
				.split(`\n## ${title}\n`)[1]!
				.split('\n## ')[0]!
				.matchAll(/^\|[^|]+\| `(\w+)` \| (\d+) \|/gm)
		].map(([, name, value]) => [name!, Number(value)])
	);

describe('the constants of the core', () => {
	it('are those of PROTOCOL.md, under its names and with its values, and no others', () => {
		const limits = table('Limits');
		const own = table("A device's own figures");
		expect(Object.keys(limits).length).toBeGreaterThan(15);
		expect(Object.keys(own).length).toBeGreaterThan(8);
		expect(defined).toEqual({ ...limits, ...own, protocolVersion });
	});

	it('call the cues where the bench calls them', () => {
		expect(defined).toMatchObject({ rearmTurns, lookPassedAfterTurns });
	});
});

describe('the README of the core', () => {
	it('explains every file and every function', () => {
		for (const [, name] of header.matchAll(/^(?:\w+ )+\*?(turnline_\w+)\(/gm)) expect(readme).toContain(`\`${name}`);
		for (const file of ['turnline.h', 'internal.h', 'sensor.c', 'ring.c', 'plan.c', 'read.c', 'write.c', 'commands.c'])
			expect(readme).toContain(`\`${file}\``);
	});

	it('shows the layout of a kept line as the code has it', () => {
		const offsets = Object.fromEntries(
			[...readFileSync(join(coreFolder, 'ring.c'), 'utf8').matchAll(/^#define AT_(\w+) (\d+)$/gm)].map(
				([, name, at]) => [name!, Number(at)]
			)
		);
		const rows = [...readme.matchAll(/^\| (\d+)(?:–(\d+))? \| `(\w+)`/gm)].map(([, from, , name]) => [
			name!,
			Number(from)
		]);
		expect(new Set(rows.map(([name, from]) => `${name} ${from}`))).toEqual(
			new Set([
				'kind 0',
				`n ${offsets.N}`,
				`e ${offsets.E}`,
				`f ${offsets.F}`,
				`v ${offsets.V}`,
				`r ${offsets.R}`,
				`t ${offsets.T}`,
				`e ${offsets.E_HIGH}`,
				`x ${offsets.X}`,
				`g ${offsets.G}`
			])
		);
	});
});
