import { mkdtempSync, readFileSync, readdirSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { basename, join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { coreFolder, coreSources, hostSource, strict, tool } from './toolchain.ts';

const folder = mkdtempSync(join(tmpdir(), 'turnstead-core-'));
afterAll(() => rmSync(folder, { recursive: true, force: true }));

const avr = ['-mmcu=atmega2560', '-Os'];
const compilers: [string, string, string[]][] = [
	['gcc, 64 bits', 'gcc', ['-O2']],
	['gcc, 32 bits', 'gcc', ['-O2', '-m32']],
	['clang', 'clang', ['-O2']],
	['avr-gcc, 16-bit int', 'avr-gcc', avr]
];

const made = new Map<string, Promise<string>>();

/** One relocatable object of the whole core, made once. */
function whole(compiler: string, flags: string[], lines: number): Promise<string> {
	const key = [compiler, ...flags, lines].join(' ');
	const known = made.get(key) ?? make(compiler, flags, lines);
	made.set(key, known);
	return known;
}

async function make(compiler: string, flags: string[], lines: number): Promise<string> {
	const objects: string[] = [];
	for (const source of coreSources) {
		const object = join(folder, `${compiler}-${flags.join('')}-${lines}-${basename(source)}.o`);
		await tool(compiler, [...strict, ...flags, `-DTURNLINE_RING_LINES=${lines}`, '-c', source, '-o', object]);
		objects.push(object);
	}
	const linked = join(folder, `${compiler}-${flags.join('')}-${lines}.o`);
	await tool(compiler, [
		...flags.filter((flag) => !flag.startsWith('-O')),
		'-nostdlib',
		'-r',
		...objects,
		'-o',
		linked
	]);
	return linked;
}

async function stateBytes(compiler: string, flags: string[], lines: number): Promise<number> {
	const source = join(folder, `state-${lines}.c`);
	const object = join(folder, `state-${lines}.o`);
	writeFileSync(source, '#include "turnline.h"\nstruct turnline state = {0};\n');
	await tool(compiler, [...flags, '-I', coreFolder, `-DTURNLINE_RING_LINES=${lines}`, '-c', source, '-o', object]);
	const symbols = await tool(compiler === 'avr-gcc' ? 'avr-nm' : 'nm', ['-S', object]);
	return parseInt(/^\S+ (\S+) \w state$/m.exec(symbols)![1]!, 16);
}

describe('the core', () => {
	it.each(compilers)('compiles without a word under the strictest warnings: %s', async (_name, compiler, flags) => {
		for (const lines of [32, 256]) await whole(compiler, flags, lines);
	});

	it('so do the programs around it', async () => {
		for (const [, compiler, flags] of compilers.slice(0, 3)) {
			for (const name of readdirSync(join(coreFolder, 'host')).filter((file) => file.endsWith('.c')))
				await tool(compiler, [...strict, ...flags, '-c', hostSource(name), '-o', join(folder, 'host.o')]);
		}
	});

	it.each(compilers)('keeps 32 lines within 1 KiB and 256 within 8 KiB: %s', async (_name, compiler, flags) => {
		expect(await stateBytes(compiler, flags, 32)).toBeLessThanOrEqual(1024);
		expect(await stateBytes(compiler, flags, 256)).toBeLessThanOrEqual(8192);
	});

	it('needs on an 8-bit board what its README says', async () => {
		const readme = readFileSync(join(coreFolder, 'README.md'), 'utf8');
		const stated = [...readme.matchAll(/^\| 8 bits, .*?\| (\d+) \| [\d,]+ \| [\d,]+ \| ([\d,]+) \|/gm)].map(
			([, lines, bytes]) => [Number(lines), Number(bytes!.replace(',', ''))]
		);
		const measured = [32, 256].map(async (lines) => [lines, await stateBytes('avr-gcc', avr, lines)]);
		expect(stated).toEqual(await Promise.all(measured));
	});

	it('refuses to be compiled with fewer lines than the protocol asks for', async () => {
		await expect(whole('gcc', ['-O1'], 31)).rejects.toThrow(/turnline_assert_ring_is_large_enough/);
	});

	it('needs nothing of a library but to set, copy and move memory', async () => {
		const symbols = await tool('nm', ['--undefined-only', await whole('gcc', ['-O2'], 32)]);
		const wanted = symbols
			.split('\n')
			.map((row) => row.trim().split(' ').pop()!)
			.filter(Boolean);
		expect(wanted.filter((name) => !['memset', 'memcpy', 'memmove', '_GLOBAL_OFFSET_TABLE_'].includes(name))).toEqual(
			[]
		);
		for (const source of [...coreSources, join(coreFolder, 'turnline.h'), join(coreFolder, 'internal.h')]) {
			const included = [...readFileSync(source, 'utf8').matchAll(/#include <(.+)>/g)].map((found) => found[1]);
			expect([basename(source), included.filter((name) => !['stddef.h', 'stdint.h'].includes(name!))]).toEqual([
				basename(source),
				[]
			]);
		}
	});

	it('has no floating point', async () => {
		// The compiler's own helpers for it are named so: __addsf3, __muldf3, __fixsfsi, __floatsisf.
		const symbols = await tool('avr-nm', ['--undefined-only', await whole('avr-gcc', avr, 32)]);
		expect(symbols).toMatch(/__/);
		expect(symbols).not.toMatch(/__\w*(sf|df)\w*/);
		for (const source of coreSources) expect(readFileSync(source, 'utf8')).not.toMatch(/\b(float|double)\b/);
	});

	it('shares no state between two winders: it has no variable of its own', async () => {
		const sizes = await tool('size', [await whole('gcc', ['-O2'], 32)]);
		const [, data, bss] = sizes.trim().split('\n')[1]!.trim().split(/\s+/);
		expect([data, bss]).toEqual(['0', '0']);
	});
});

describe('the same hour on another machine', () => {
	it('is told to the letter the same with 64, 32 and 8 bits', async () => {
		const program = async (compiler: string, flags: string[]) => {
			const file = join(folder, `replay${flags[0]}`);
			await tool(compiler, [...strict, ...flags, ...coreSources, hostSource('replay.c'), '-o', file]);
			return file;
		};
		const here = await tool(await program('gcc', ['-O2']), []);
		const said = new Set([...here.matchAll(/ (?:k|why)=(\w+)/g)].map(([, word]) => word));
		for (const word of ['go', 'stop', 'rev', 'ease', 'look', 'at', 'over', 'btn', 'old', 'gone'])
			expect(said).toContain(word);
		expect(here).toMatch(/ pb=/);
		expect(await tool(await program('gcc', ['-m32', '-O2']), [])).toBe(here);
		// A microcontroller of 8 bits, simulated: it colours what its serial port says and puts a dot after each line.
		const simulated = await tool('simavr', ['-m', 'atmega2560', '-f', '16000000', await program('avr-gcc', avr)]);
		const lines = [...simulated.matchAll(/^[^A-Z\n]*([A-Z]+ .* ~[0-9A-F]{4})\.$/gm)].map(([, line]) => line);
		expect(lines.join('\n')).toBe(here.trimEnd());
	});
});

describe('the parser under fuzzing', () => {
	it('reads whatever comes without a fault', async () => {
		const program = join(folder, 'fuzz');
		const flags = ['-g', '-O1', '-fsanitize=fuzzer,address,undefined', '-fno-sanitize-recover=all'];
		await tool('clang', [...strict, ...flags, ...coreSources, hostSource('fuzz.c'), '-o', program]);
		const runs = process.env.SOAK ? 1_000_000 : 20_000;
		const said = await tool(program, [
			`-runs=${runs}`,
			'-seed=1',
			'-max_len=600',
			`-dict=${hostSource('fuzz.dict')}`,
			`-artifact_prefix=${folder}/`
		]);
		expect(said).toContain(`Done ${runs} runs`);
	}, 1_200_000);
});
