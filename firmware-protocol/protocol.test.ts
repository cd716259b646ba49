import { readFileSync } from 'node:fs';
import { describe, expect, it } from 'vitest';
import * as turnline from '../src/lib/turnline/index.ts';
import { verbs, type KeySpec } from '../src/lib/turnline/keys.ts';

const text = readFileSync(new URL('./PROTOCOL.md', import.meta.url), 'utf8');
const section = (title: string) => text.split(`\n## ${title}\n`)[1]!.split('\n## ')[0]!;
const rows = (part: string) =>
	part
		.split('\n')
		.filter((line) => line.startsWith('| `') || /^\| [a-zA-Z]/.test(line))
		.map((line) => line.split('|').map((cell) => cell.trim()));

describe('PROTOCOL.md', () => {
	it('states the limits of the code, and all of them', async () => {
		const stated = rows(section('Limits'))
			.filter(([, , name]) => name?.startsWith('`'))
			.map(([, , name, value]) => [name!.slice(1, -1), Number(value)]);
		const { protocolVersion, subprotocol, u32Max, i32Min, i32Max, i16Min, i16Max, u16Max, ...limits } =
			await import('../src/lib/turnline/limits.ts');
		expect(Object.fromEntries(stated)).toEqual({ ...limits });
		expect(section('Versions')).toContain(`\`p\` is ${protocolVersion}.`);
		expect(section('Carriers')).toContain(`subprotocol \`${subprotocol}\``);
		const minus = (value: number) => String(value).replace('-', '\u2212');
		expect(section('Keys')).toContain(
			`u32 is 0 to ${u32Max}, u16 here 1 to ${u16Max}, i16 ${minus(i16Min)} to ${i16Max}, i32 ${minus(i32Min)} to ${i32Max}.`
		);
	});

	it('names for each verb the keys the code wants and allows', () => {
		const stated = rows(section('Verbs')).filter((row) => row.length > 4 && row[1]!.startsWith('`'));
		const words = (cell: string) => cell.replaceAll('`', '').split(' ').filter(Boolean).sort();
		const keys = (specs: readonly KeySpec[], required: boolean) =>
			specs.filter((spec) => spec.required === required).map(({ key }) => key).sort(); // prettier-ignore
		expect(stated.map(([, verb]) => verb!.slice(1, -1))).toEqual([...verbs.keys()]);
		for (const [, verb, must, may] of stated) {
			const specs = verbs.get(verb!.slice(1, -1))!.keys;
			expect([verb, words(must!), words(may!)]).toEqual([verb, keys(specs, true), keys(specs, false)]);
		}
	});

	it('explains every key and every kind of event the code knows', () => {
		const explained = (part: string) =>
			rows(part).flatMap(([, cell]) => [...cell!.matchAll(/`([a-z]+)`/g)].map((match) => match[1]!));
		const known = new Set([...verbs.values()].flatMap(({ keys }) => keys.map(({ key }) => key)));
		const [keys, kinds] = section('Keys').split('### Kinds of event');
		expect(new Set(explained(keys!))).toEqual(known);
		expect(explained(kinds!.replace('| `k` |', '')).sort()).toEqual([...turnline.eventKinds].sort());
	});

	it('lists every reason for refusing a line', () => {
		for (const why of turnline.refusals) expect(section('Line')).toContain(`\`${why}\``);
	});

	it('shows only lines that are read and would be written so', () => {
		const shown = [...text.matchAll(/^([→←]) (.+)$/gm)];
		expect(shown.length).toBeGreaterThan(20);
		for (const [, arrow, line] of shown) {
			const parsed = arrow === '→' ? turnline.parseDeviceLine(line!) : turnline.parseHostLine(line!);
			if (!parsed.ok || !parsed.line) return expect.fail(`${line}: ${JSON.stringify(parsed)}`);
			expect(turnline.formatLine(parsed.line)).toBe(line);
		}
	});
});
