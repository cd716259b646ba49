import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import good from '../../../firmware-protocol/vectors/good.json' with { type: 'json' };
import { formatLine } from './format.ts';
import { verbs, type KeySpec } from './keys.ts';
import { parseLine } from './parse.ts';
import type { Line } from './types.ts';

const hex = fc.constantFrom(...'0123456789ABCDEF');
const visible = fc.integer({ min: 0x21, max: 0x7d }).map((code) => String.fromCharCode(code));

function valueOf({ form }: KeySpec, integerMax: number, wordMax: number): fc.Arbitrary<string | number> {
	if (form.kind === 'integer') return fc.integer({ min: form.min, max: Math.min(form.max, integerMax) });
	if (form.kind === 'boot') return fc.string({ unit: hex, minLength: 8, maxLength: 8 });
	return fc.string({ unit: visible, minLength: 1, maxLength: wordMax });
}

/** Any line: each optional key there or not, retained totals whole, a target off its zero. */
const anyLine: fc.Arbitrary<Line> = fc.oneof(
	...[...verbs].map(([verb, { keys }]) => {
		// A HI has no room for every key with its longest value.
		const [integerMax, wordMax] = verb === 'HI' ? [99_999, 6] : [Infinity, 16];
		const values = Object.fromEntries(keys.map((spec) => [spec.key, valueOf(spec, integerMax!, wordMax!)]));
		const retained = ['pb', 'pf', 'pv'];
		const some = (without: string[]) =>
			fc.record(Object.fromEntries(Object.entries(values).filter(([key]) => !without.includes(key))), {
				requiredKeys: keys
					.filter((spec) => spec.required || retained.includes(spec.key))
					.map(({ key }) => key)
					.filter((key) => !without.includes(key))
			});
		return fc
			.oneof(some([]), some(retained))
			.filter((line) => verb !== 'SET' || line.tgt !== (line.from ?? 0))
			.map((line) => ({ verb, ...line }) as unknown as Line);
	})
);

const most = 4_294_967_295;
const totals = { b: 'FFFFFFFF', n: most, e: most, f: most, v: most, t: most };
const longest: Line = { verb: 'HI', p: 1, dev: 'x'.repeat(16), ...totals, pb: 'FFFFFFFF', pf: most, pv: most };

describe('writing a line', () => {
	it.each(good.written)('writes: $text', ({ text, line }) => {
		expect(formatLine(line as Line)).toBe(text);
	});

	it('what is written is read as it was', () => {
		fc.assert(
			fc.property(anyLine, (line) => {
				expect(parseLine(formatLine(line))).toEqual({ ok: true, line });
			}),
			{ numRuns: 500 }
		);
	});

	it('minus zero is written as zero', () => {
		const tick = { verb: 'T', b: '5C0E91A7', n: 2, e: 1, f: 1, v: 0, r: -0, t: 1040 } as const;
		expect(formatLine(tick)).toBe(formatLine({ ...tick, r: 0 }));
	});

	it('throws rather than write what no reader takes', () => {
		const plan = { verb: 'SET', id: 1, b: '5C0E91A7', tgt: 8000, look: 500, ease: 40, stop: 3 } as const;
		expect(() => formatLine({ ...plan, tgt: 0.5 })).toThrow(/SET tgt=0.5/);
		expect(() => formatLine({ ...plan, from: 8000 })).toThrow(/tgt/);
		expect(() => formatLine({ ...plan, b: 'two\nlines' })).toThrow(RangeError);
		expect(() => formatLine({ ...plan, id: undefined as unknown as number })).toThrow(/id/);
		const device = { fw: 'x'.repeat(16), r: -32_768, ppr: 65_535, dir: 1, rep: 65_535, buf: most } as const;
		expect(() => formatLine({ ...longest, ...device })).toThrow(/160/);
	});

	it('a HI at its longest fits once it leaves out what it may', () => {
		expect(parseLine(formatLine(longest))).toEqual({ ok: true, line: longest });
	});
});
