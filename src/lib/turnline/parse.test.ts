import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import good from '../../../firmware-protocol/vectors/good.json' with { type: 'json' };
import refused from '../../../firmware-protocol/vectors/refused.json' with { type: 'json' };
import traces from '../../../firmware-protocol/vectors/traces.json' with { type: 'json' };
import { withChecksum } from './format.ts';
import { verbs } from './keys.ts';
import { parseDeviceLine, parseHostLine, parseLine } from './parse.ts';
import { newSplitter } from './split.ts';

const summed = good.written.map(({ text }) => text);
const sideOf = (verb: string) => verbs.get(verb)!.side;

describe('reading a line', () => {
	it.each([...good.written, ...good.alsoRead])('reads: $text', ({ text, line }) => {
		expect(parseLine(text)).toEqual({ ok: true, line });
	});

	it.each(refused)('refuses $note as $why', ({ text, why, key }) => {
		expect(parseLine(text)).toMatchObject({ ok: false, why, ...(key && { key }) });
	});

	it('takes a line with its LF, and with CR and LF', () => {
		const text = summed[2]!;
		expect(parseLine(`${text}\n`)).toEqual(parseLine(text));
		expect(parseLine(`${text}\r\n`)).toEqual(parseLine(text));
	});

	it('a host verb from a winder, and a winder verb from the host, is an unknown verb', () => {
		for (const { text, line } of good.written) {
			const own = sideOf(line.verb) === 'device' ? parseDeviceLine : parseHostLine;
			const other = sideOf(line.verb) === 'device' ? parseHostLine : parseDeviceLine;
			expect(own(text)).toEqual({ ok: true, line });
			expect(other(text)).toEqual({ ok: false, why: 'verb', verb: line.verb });
		}
		expect(parseDeviceLine('STOP')).toEqual({ ok: false, why: 'verb', verb: 'STOP' });
	});

	it('a known verb in other words of the language is no verb', () => {
		for (const name of ['constructor', '__proto__', 'toString'])
			expect(parseLine(withChecksum(name))).toMatchObject({ ok: false, why: 'form' });
	});

	it('every single-bit flip of every line with a checksum is refused', () => {
		for (const text of summed)
			for (let at = 0; at < text.length; at++)
				for (let bit = 0; bit < 8; bit++) {
					const flipped = Uint8Array.from(`${text}\n`, (char) => char.charCodeAt(0));
					flipped[at]! ^= 1 << bit;
					// Through the splitter, since a flip can also make a line end.
					for (const part of newSplitter().push(flipped))
						expect(parseLine(part), `${text}: byte ${at} bit ${bit}`).toMatchObject({ ok: false });
				}
	});

	it('every exchange of two unequal bytes of every line with a checksum is refused', () => {
		for (const text of summed)
			for (let a = 0; a < text.length; a++)
				for (let b = a + 1; b < text.length; b++) {
					if (text[a] === text[b]) continue;
					const swapped = text.slice(0, a) + text[b] + text.slice(a + 1, b) + text[a] + text.slice(b + 1);
					if (parseLine(swapped).ok) expect.fail(`${text}: bytes ${a} and ${b}`);
				}
	});

	it('random text never throws', () => {
		const near = fc.string({ unit: fc.constantFrom(...'HITEOKNSP? =~#-0123456789abcdefv\r\n\0\u00e9') });
		fc.assert(
			fc.property(fc.oneof(fc.string({ unit: 'binary' }), near, near.map(withChecksum)), (text) => {
				expect(typeof parseLine(text).ok).toBe('boolean');
			}),
			{ numRuns: 500 }
		);
	});

	it('a very long text is refused without being read', () => {
		expect(parseLine('T '.repeat(5_000_000))).toEqual({ ok: false, why: 'too-long' });
	});
});

/** The delivery rules in their shortest form: greatest totals, greatest n, events without a gap. */
function hear(steps: { from: string; text: string }[]) {
	const boots: Record<string, { f: number; v: number; n: number; events: Set<number> }> = {};
	for (const { from, text } of steps) {
		const parsed = from === 'device' ? parseDeviceLine(text) : parseHostLine(text);
		if (!parsed.ok || !parsed.line) continue;
		const line = parsed.line;
		if (line.verb !== 'HI' && line.verb !== 'T' && line.verb !== 'E') continue;
		const boot = (boots[line.b] ??= { f: 0, v: 0, n: 0, events: new Set() });
		boot.f = Math.max(boot.f, line.f);
		boot.v = Math.max(boot.v, line.v);
		if (line.verb !== 'HI') boot.n = Math.max(boot.n, line.n);
		if (line.verb === 'E') boot.events.add(line.e);
	}
	return Object.fromEntries(
		Object.entries(boots).map(([b, { f, v, n, events }]) => {
			let e = 0;
			while (events.has(e + 1)) e++;
			return [b, { f, v, ack: n > 0 ? { n, e } : null }];
		})
	);
}

describe('traces', () => {
	it.each(traces)('$name', (trace) => {
		expect(hear(trace.steps)).toEqual(trace.then.boots);
	});

	it.each(traces)('$name, in any order and with doubles', (trace) => {
		fc.assert(
			fc.property(
				fc.shuffledSubarray([...trace.steps, ...trace.steps], { minLength: trace.steps.length * 2 }),
				(steps) => {
					expect(hear(steps)).toEqual(trace.then.boots);
				}
			),
			{ numRuns: 30 }
		);
	});
});
