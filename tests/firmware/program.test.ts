import { spawn } from 'node:child_process';
import { join } from 'node:path';
import type { Readable, Writable } from 'node:stream';
import { describe, expect, inject, it } from 'vitest';
import { formatLine, parseDeviceLine } from '../../src/lib/turnline/index.ts';

const program = () => join(inject('firmware'), 'winder-32');

/** Collects lines of a stream, and waits for one. */
function reader(stream: Readable) {
	const lines: string[] = [];
	let held = '';
	let wake = () => {};
	stream.setEncoding('latin1').on('data', (chunk: string) => {
		const parts = (held + chunk).split('\n');
		held = parts.pop()!;
		lines.push(...parts);
		wake();
	});
	return {
		lines,
		async until(found: (line: string) => boolean): Promise<string> {
			for (;;) {
				const line = lines.find(found);
				if (line !== undefined) return line;
				await new Promise<void>((resolve) => (wake = resolve));
			}
		}
	};
}

const ended = (child: ReturnType<typeof spawn>) =>
	new Promise<number | null>((resolve) => child.on('close', (code) => resolve(code)));

describe('the winder that is only a program', () => {
	it('speaks the line on standard input and output, told its time and edges on descriptor 3', async () => {
		const child = spawn(program(), ['--boot', '77AA01F3', '--stop-output', 'both'], {
			stdio: ['pipe', 'pipe', 'inherit', 'pipe', 'pipe']
		});
		const end = ended(child);
		const out = reader(child.stdout!);
		const reports = reader(child.stdio[4] as Readable);
		const control = child.stdio[3] as Writable;
		expect(parseDeviceLine(await out.until((line) => line.startsWith('HI ')))).toMatchObject({
			ok: true,
			line: { b: '77AA01F3', f: 0 }
		});
		child.stdin!.write(`${formatLine({ verb: 'SET', id: 3, b: '77AA01F3', tgt: 2, look: 0, ease: 0, stop: 0 })}\n`);
		await out.until((line) => line.startsWith('OK b=77AA01F3 id=3 '));
		let us = 0;
		for (let turn = 0; turn < 3; turn++) for (const levels of [1, 3, 2, 0]) control.write(`${(us += 20_000)} levels ${levels}\n`); // prettier-ignore
		control.write(`${us} mark here\n`);
		expect(await reports.until((line) => line.startsWith('mark here'))).toMatch(
			/^mark here b=77AA01F3 f=3 v=0 kept=\d+$/
		);
		expect(reports.lines).toEqual(expect.arrayContaining(['stop 1', 'cue stop', 'cue over']));
		await out.until((line) => line.includes(' k=over '));
		control.end();
		expect(await end).toBe(0);
	});

	it('by the real clock turns itself, and answers as it goes', async () => {
		const child = spawn(program(), ['--real', '--turn', '600:60000:1'], { stdio: ['pipe', 'pipe', 'inherit'] });
		const end = ended(child);
		const out = reader(child.stdout);
		const turned = await out.until((line) => /^T .* f=[2-9] /.test(line));
		expect(parseDeviceLine(turned)).toMatchObject({ ok: true, line: { v: 0 } });
		const count = out.lines.length;
		child.stdin.write('?\n');
		await out.until((line) => line.startsWith('HI ') && out.lines.indexOf(line) >= count);
		child.stdin.end();
		expect(await end).toBe(0);
	});

	it.each([
		['an order that is none', ['--script'], '0 fly\n', /not an order: fly/],
		['time that falls', ['--script'], '5000 time\n4000 time\n', /not a time from now on: 4000/],
		['an option out of range', ['--script', '--rpm-max', '59'], '', /not a number in its range: 59/],
		['an option that is none', ['--fast'], '', /no such option/],
		['no control', [], '', /control is missing/]
	])('ends with 2 and a sentence at %s', async (_what, options, input, sentence) => {
		const child = spawn(program(), options, { stdio: ['pipe', 'ignore', 'pipe'] });
		const end = ended(child);
		let said = '';
		child.stderr.on('data', (chunk: Buffer) => (said += chunk.toString()));
		child.stdin.on('error', () => {});
		child.stdin.end(input);
		expect(await end).toBe(2);
		expect(said).toMatch(sentence);
	});
});
