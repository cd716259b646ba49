import { spawnSync } from 'node:child_process';
import { join } from 'node:path';
import fc from 'fast-check';
import { describe, expect, inject, it } from 'vitest';
import crcVectors from '../../firmware-protocol/vectors/crc.json' with { type: 'json' };
import good from '../../firmware-protocol/vectors/good.json' with { type: 'json' };
import refused from '../../firmware-protocol/vectors/refused.json' with { type: 'json' };
import {
	crc16Ibm3740,
	crcText,
	formatLine,
	i16Max,
	lineBytesMax,
	parseDeviceLine,
	parseHostLine,
	u32Max,
	withChecksum,
	type DeviceLine,
	type Event,
	type Hi,
	type HostLine,
	type Tick
} from '../../src/lib/turnline/index.ts';
import { kindNumber } from './board.ts';

/** Asks the core's reader and writer; one answer line for each request line, except for K. */
function ask(requests: string[]): string[] {
	const done = spawnSync(join(inject('firmware'), 'codec'), { input: `${requests.join('\n')}\n`, encoding: 'latin1' });
	if (done.status !== 0) throw new Error(`codec ended with ${done.status}: ${done.stderr}`);
	return done.stdout.split('\n').slice(0, -1);
}

/** What the core must say of a line from the host, in the words its test program uses. */
function expected(text: string): string {
	const parsed = parseHostLine(text);
	// A device need not tell the variants of checksum apart: it stays silent to all of them.
	if (!parsed.ok) {
		const why = parsed.why.replace(/^checksum-.*/, 'checksum');
		return `refused ${why}${parsed.key ? ` ${parsed.key}` : ''}`;
	}
	if (!parsed.line) return 'nothing';
	const { verb, ...values } = parsed.line;
	const all = verb === 'SET' ? { ...values, from: parsed.line.from ?? 0, fst: parsed.line.fst ?? 0 } : values;
	// The test program writes id and b first, then the other keys in the order of PROTOCOL.md.
	const order = ['id', 'b', 'tgt', 'look', 'ease', 'stop', 'from', 'fst', 'n', 'e', 'ms', 'u'];
	const pairs = Object.entries(all).sort(([one], [other]) => order.indexOf(one) - order.indexOf(other));
	return [verb, ...pairs.map(([key, value]) => `${key}=${value}`)].join(' ');
}

/** Only what fits one line of the request: bytes over 7F and line ends are the splitter's to see. */
const askable = (text: string) =>
	[...text].every((char) => char !== '\n' && char.charCodeAt(0) > 0 && char.charCodeAt(0) < 0x80);

const hex = fc.integer({ min: 0, max: u32Max }).map((value) => value.toString(16).toUpperCase().padStart(8, '0'));
const u32 = fc.oneof(fc.nat(u32Max), fc.nat(1000), fc.constantFrom(0, 1, u32Max));
const i32 = fc.oneof(fc.integer(), fc.integer({ min: -1000, max: 1000 }));
const i16 = fc.integer({ min: -32_768, max: i16Max });
const word = fc.stringMatching(/^[!-}]{1,16}$/);
const optional = <T>(value: fc.Arbitrary<T>) => fc.option(value, { nil: undefined });

const hostLine: fc.Arbitrary<HostLine> = fc.oneof(
	fc.constant<HostLine>({ verb: '?' }),
	fc
		.record({
			verb: fc.constant('SET' as const),
			id: u32,
			b: hex,
			tgt: i32,
			look: u32,
			ease: u32,
			stop: u32,
			from: optional(i32),
			fst: optional(u32)
		})
		.filter((line) => line.tgt !== (line.from ?? 0)),
	fc.record({ verb: fc.constant('STOP' as const), id: optional(u32), b: optional(hex) }),
	fc.record({ verb: fc.constant('ACK' as const), b: hex, n: u32, e: u32 }),
	fc.record({ verb: fc.constant('SYNC' as const), b: hex, e: u32 }),
	fc.record({ verb: fc.constant('HOLD' as const), ms: fc.nat(60_000) }),
	fc.record({ verb: fc.constant('TIME' as const), u: u32 })
);

describe('what the host writes and the core reads', () => {
	it('every vector is read or refused as the other implementation does', () => {
		const texts = [...good.written, ...good.alsoRead, ...refused].map(({ text }) => text).filter(askable);
		expect(texts.length).toBeGreaterThan(80);
		expect(ask(texts.map((text) => `R ${text}`))).toEqual(texts.map(expected));
	});

	it('any line the host can write is read as it was meant', () => {
		fc.assert(
			fc.property(fc.array(hostLine, { minLength: 50, maxLength: 200 }), (lines) => {
				const texts = lines.map(formatLine);
				expect(ask(texts.map((text) => `R ${text}`))).toEqual(texts.map(expected));
			}),
			{ numRuns: 20 }
		);
	});

	it('a line put together wrongly is refused for the same reason and the same key', () => {
		const key = fc.oneof(
			fc.constantFrom('id', 'b', 'tgt', 'look', 'ease', 'stop', 'from', 'fst', 'n', 'e', 'ms', 'u', 'x', 'long'),
			fc.stringMatching(/^[a-zA-Z]{0,6}$/)
		);
		const value = fc.oneof(
			{ weight: 4, arbitrary: fc.oneof(u32, i32).map(String) },
			{ weight: 2, arbitrary: hex },
			fc.constantFrom('', '-', '-0', '00', '+5', '1e9', '4294967296', '-2147483649', '99999999999', '0x10', 'a=b'),
			fc.stringMatching(/^[ -~]{0,45}$/)
		);
		const body = fc
			.tuple(
				fc.oneof(
					fc.constantFrom('?', 'SET', 'STOP', 'ACK', 'SYNC', 'HOLD', 'TIME', 'T', 'HI', 'LAMP', 'set', ''),
					fc.stringMatching(/^[ -~]{0,6}$/)
				),
				fc.array(fc.tuple(key, value), { maxLength: 9 })
			)
			.map(([verb, pairs]) => [verb, ...pairs.map(([k, v]) => `${k}=${v}`)].join(' '));
		const text = fc.tuple(body, fc.nat(9)).map(([text, end]) => {
			if (end === 0) return text;
			if (end === 1) return `${text} ~${crcText(crc16Ibm3740(text) ^ 1)}`;
			return end === 2 ? `${withChecksum(text)}\r` : withChecksum(text);
		});
		fc.assert(
			fc.property(fc.array(text.filter(askable), { minLength: 100, maxLength: 300 }), (texts) => {
				const answers = ask(texts.map((line) => `R ${line}`));
				// Side by side, so that a difference shows its line.
				expect(texts.map((line, at) => [line, answers[at]])).toEqual(texts.map((line) => [line, expected(line)]));
			}),
			{ numRuns: 30 }
		);
	});

	it('each value at and beyond each end, and each wrong spelling, is taken or refused alike', () => {
		const bodies = [
			'SET id=17 b=5C0E91A7 tgt=8000 look=500 ease=40 stop=3 from=1 fst=100',
			'STOP id=20 b=5C0E91A7',
			'ACK b=5C0E91A7 n=1044 e=3',
			'SYNC b=5C0E91A7 e=1',
			'HOLD ms=500',
			'TIME u=1796133600'
		];
		const ends = [0, 1, 60_000, 60_001, 2 ** 31 - 1, 2 ** 31, 2 ** 31 + 1, 2 ** 32 - 1, 2 ** 32, 2 ** 32 + 1, 1e10];
		const odd = [
			'-0',
			'00',
			'01',
			'+5',
			'-',
			'--1',
			'1-',
			'1e9',
			'0x10',
			'1.5',
			'NaN',
			'5C0E91A',
			'5c0e91a7',
			'FFFFFFFF'
		];
		const values = [...odd, ...ends.flatMap((end) => [`${end}`, `-${end}`])];
		const texts = bodies.flatMap((body) =>
			[...body.matchAll(/ ([a-z]+)=/g)].flatMap(([, key]) =>
				values.map((value) => withChecksum(body.replace(new RegExp(` ${key}=[^ ]+`), ` ${key}=${value}`)))
			)
		);
		const answers = ask(texts.map((text) => `R ${text}`));
		expect(texts.map((text, at) => [text, answers[at]])).toEqual(texts.map((text) => [text, expected(text)]));
	});

	it('every flipped bit and every exchange of two bytes is refused', () => {
		const text = 'SET id=21 b=5C0E91A7 tgt=11183 look=500 ease=40 stop=3 from=3183 fst=100 ~49BC';
		const wrong: string[] = [];
		for (let at = 0; at < text.length; at++) {
			for (let bit = 0; bit < 7; bit++)
				wrong.push(text.slice(0, at) + String.fromCharCode(text.charCodeAt(at) ^ (1 << bit)) + text.slice(at + 1));
			for (let other = at + 1; other < text.length - 6; other++)
				if (text[at] !== text[other])
					wrong.push(text.slice(0, at) + text[other] + text.slice(at + 1, other) + text[at] + text.slice(other + 1));
		}
		const askables = wrong.filter(askable);
		const answers = ask(askables.map((line) => `R ${line}`));
		expect(askables.length).toBeGreaterThan(2000);
		// A # at the start makes a comment of it, which is not acted on either.
		expect(answers.filter((answer) => !/^(refused |nothing$)/.test(answer))).toEqual([]);
	});

	it('its checksum is that of the vectors and of any text', () => {
		const own = crcVectors.values.filter(({ variant, text }) => variant === 'CRC-16/IBM-3740' && text !== '');
		expect(ask(own.map(({ text }) => `C ${text}`))).toEqual(own.map(({ crc }) => crc));
		fc.assert(
			fc.property(fc.array(fc.stringMatching(/^[ -~]{1,150}$/), { minLength: 50, maxLength: 50 }), (texts) => {
				expect(ask(texts.map((text) => `C ${text}`))).toEqual(texts.map((text) => crcText(crc16Ibm3740(text))));
			}),
			{ numRuns: 10 }
		);
	});
});

type Kind = Parameters<typeof kindNumber>[0];
const answers = ['-', 'OK', 'boot', 'verb', 'range', 'gone', 'old', 'unwired'];

/** The request that makes the core write a line, or null where it never writes one like it. */
function request(line: DeviceLine): string | null {
	if (line.verb === 'T' || line.verb === 'E') {
		const { b, n, e, f, v, r = 0, t, x = 0, g = 0 } = line;
		const kind = line.verb === 'E' ? ` ${kindNumber(line.k as Kind)}` : '';
		return kind === ' undefined' ? null : `${line.verb} ${b} ${n} ${e} ${f} ${v} ${r} ${t} ${x} ${g}${kind}`;
	}
	if (line.verb === 'OK') return `A ${line.b} 1 ${line.id}`;
	if (line.verb === 'NO') return `A ${line.b} ${answers.indexOf(line.why!)} ${line.id ?? '-'}`;
	if (line.verb === 'BYE') return line.b === undefined ? null : `B ${line.b}`;
	return null;
}

const totals = { b: hex, n: fc.integer({ min: 1, max: u32Max }), f: u32, v: u32, r: i16, t: u32 };
const some = optional(fc.integer({ min: 1, max: u32Max }));
const kept: fc.Arbitrary<Tick | Event> = fc.oneof(
	fc.record({ verb: fc.constant('T' as const), ...totals, e: u32, x: some, g: some }),
	fc.record({
		verb: fc.constant('E' as const),
		...totals,
		e: fc.integer({ min: 1, max: u32Max }),
		k: fc.constantFrom('go', 'stop', 'rev', 'ease', 'look', 'at', 'over', 'btn', 'bufov'),
		x: some,
		g: some
	})
);

describe('what the core writes and the host reads', () => {
	it('the vectors of a winder that the core can say, letter by letter', () => {
		let said = 0;
		for (const { text, line } of good.written) {
			const asked = request(line as DeviceLine);
			if (asked === null) continue;
			// The core's events always tell the speed.
			const whole = line.verb === 'E' && !('r' in line) ? formatLine({ ...line, r: 0 } as Event) : text;
			expect(ask([asked])).toEqual([whole]);
			said++;
		}
		expect(said).toBeGreaterThanOrEqual(12);
	});

	it('any totals, as the other implementation writes them', () => {
		fc.assert(
			fc.property(fc.array(kept, { minLength: 100, maxLength: 200 }), (lines) => {
				expect(ask(lines.map((line) => request(line)!))).toEqual(lines.map(formatLine));
			}),
			{ numRuns: 20 }
		);
	});

	it('a birth line says all it has room for, and leaves out the rest in the stated order', () => {
		const birth = fc.record({
			dev: word,
			fw: optional(word),
			b: hex,
			n: u32,
			e: u32,
			f: u32,
			v: u32,
			periodUs: fc.integer({ min: 1000, max: 3_000_000 }),
			t: u32,
			ppr: fc.integer({ min: 1, max: 65_535 }),
			dir: fc.constantFrom(0 as const, 1 as const),
			rep: fc.integer({ min: 10, max: 1000 }),
			retained: optional(fc.record({ pb: hex, pf: u32, pv: u32 }))
		});
		fc.assert(
			fc.property(fc.array(birth, { minLength: 50, maxLength: 100 }), (births) => {
				const requests = births.map(
					({ dev, fw, b, n, e, f, v, periodUs, t, ppr, dir, rep, retained }) =>
						`H ${dev} ${fw ?? '-'} ${b} ${n} ${e} ${f} ${v} ${periodUs} ${t} ${ppr} ${dir} ${rep} ` +
						(retained ? `${retained.pb} ${retained.pf} ${retained.pv}` : '- 0 0')
				);
				expect(ask(requests)).toEqual(
					births.map(({ periodUs, retained, fw, ...rest }) => {
						const r = Math.min(
							i16Max,
							Math.floor((Math.floor(60_000_000 / rest.ppr) + Math.floor(periodUs / 2)) / periodUs)
						);
						const line: Hi = { verb: 'HI', p: 1, ...rest, ...(fw && fw !== '-' && { fw }), r, buf: 32, ...retained };
						for (const key of [null, 'fw', 'rep', 'buf', 'ppr', 'dir', 'r'] as const) {
							if (key) delete line[key];
							try {
								return formatLine(line);
							} catch {
								// Too long still: the next key goes.
							}
						}
						throw new Error('does not fit at all');
					})
				);
			}),
			{ numRuns: 20 }
		);
		const most = { b: 'FFFFFFFF', n: u32Max, e: u32Max, f: u32Max, v: u32Max };
		const [longest] = ask([
			`H ${'x'.repeat(16)} ${'y'.repeat(16)} ${Object.values(most).join(' ')} 1000 ${u32Max} 65535 1 1000 FFFFFFFF ${u32Max} ${u32Max}`
		]);
		expect(longest!.length).toBeLessThan(lineBytesMax);
		expect(parseDeviceLine(longest!)).toMatchObject({ ok: true, line: { ...most, pb: 'FFFFFFFF', pf: u32Max } });
	});
});

describe('a packed line', () => {
	const step = fc.record({
		n: fc.oneof(fc.nat(20), fc.nat(3_000_000)),
		e: fc.oneof({ weight: 20, arbitrary: fc.constant(0) }, { weight: 1, arbitrary: fc.nat(12_000) }),
		f: fc.oneof(fc.nat(20), fc.nat(3_000_000)),
		v: fc.oneof(fc.nat(3), fc.nat(3_000_000)),
		t: fc.oneof(fc.nat(1000), fc.nat(3_000_000)),
		x: fc.oneof(fc.constant(0), fc.nat(16_000)),
		g: fc.oneof(fc.constant(0), fc.nat(60)),
		kind: fc.constantFrom<Kind>('tick', 'tick', 'tick', 'go', 'stop', 'look', 'btn')
	});

	it('says the same as when it was made, however far the numbers have gone since', () => {
		const mod = (value: number) => value % 2 ** 32;
		fc.assert(
			fc.property(fc.array(step, { minLength: 60, maxLength: 120 }), u32, (steps, start) => {
				const now = { n: 0, e: 0, f: start, v: 0, t: start, x: 0, g: 0 };
				const made = new Set<string>();
				const requests: string[] = [`K 0 0 ${start} 0 ${start} 0 0 0`];
				const make = (kind: Kind) => {
					now.n++;
					if (kind !== 'tick') now.e++;
					const own = { b: '00000000', n: now.n, e: now.e, f: mod(now.f), v: now.v, r: 0, t: mod(now.t) };
					const seen = { ...(now.x > 0 && { x: now.x }), ...(now.g > 0 && { g: now.g }) };
					made.add(formatLine(kind === 'tick' ? { verb: 'T', ...own, ...seen } : { verb: 'E', ...own, k: kind }));
				};
				make('tick');
				for (const { kind, ...by } of steps) {
					// The core counts suspected pulses to 65,535.
					const g = Math.min(by.g, 65_535 - now.g);
					for (const key of ['n', 'e', 'f', 'v', 't', 'x'] as const) now[key] += by[key];
					now.g += g;
					requests.push(`K ${by.n} ${by.e} ${by.f} ${by.v} ${by.t} ${by.x} ${g} ${kindNumber(kind)}`);
					make(kind);
				}
				const lines = ask([...requests, 'L']).slice(0, -1);
				expect(lines.length).toBeGreaterThan(0);
				expect(lines.filter((line) => !made.has(line))).toEqual([]);
			}),
			{ numRuns: 60 }
		);
	});

	it('lines of an ordinary day are all there: an event after a week, a tick after three hours, is not let go', () => {
		const requests = [
			'K 0 0 0 0 0 0 0 1',
			`K 6048000 20000 6000000 0 604800000 0 0 0`,
			`K 9000 50 4000 0 12000000 0 0 0`
		];
		expect(ask([...requests, 'L'])).toHaveLength(4);
	});
});
