import { spawn } from 'node:child_process';
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { afterAll, beforeAll, describe, expect, inject, it } from 'vitest';
import type { Carrier } from '../../firmware-protocol/conformance/carrier.ts';
import { openDriven } from '../../firmware-protocol/conformance/carrier-exec.ts';
import { play, sessionMsMax } from '../../firmware-protocol/conformance/play.ts';
import { isProved } from '../../firmware-protocol/conformance/report.ts';
import { judge, rules, type Level, type Verdict } from '../../firmware-protocol/conformance/rules.ts';
import type { Session } from '../../firmware-protocol/conformance/session.ts';
import { crc16Xmodem, crcText, formatLine, withChecksum } from '../../src/lib/turnline/index.ts';
import { coreFolder } from './toolchain.ts';

const core = (options = '') => `${join(inject('firmware'), 'winder-32')} --script --boot 5C0E91A7 ${options}`;

/** What stands between the core and the host to make a wrong winder of it; null: the line is swallowed. */
interface Wrong {
	/** A body of the winder, without its checksum. */
	out?(body: string): string | null;
	/** The checksum of what goes out. */
	sum?(body: string): string;
	/** A line of the host. */
	into?(text: string): string | null;
}

function wrap(carrier: Carrier, wrong: Wrong): Carrier {
	return {
		...carrier,
		send: (texts) => carrier.send(texts.flatMap((text) => (wrong.into ? (wrong.into(text) ?? []) : text))),
		take: () =>
			carrier.take().flatMap((heard) => {
				if (heard.from !== 'winder') return heard;
				const body = heard.text.slice(0, -6);
				const changed = wrong.out ? wrong.out(body) : body;
				if (changed === null) return [];
				return { ...heard, text: wrong.sum ? `${changed} ~${wrong.sum(changed)}` : withChecksum(changed) };
			})
	};
}

async function run(
	level: Level,
	wrong: Wrong = {},
	options = '',
	more: { turns?: number } = {}
): Promise<{ session: Session; verdicts: Verdict[] }> {
	const driven = openDriven(core(options));
	if (more.turns !== undefined)
		driven.turn = (
			(turn) => () =>
				turn(more.turns!)
		)(driven.turn!);
	try {
		const session = await play(wrap(driven, wrong), { level, firstId: 1000, tell: () => {} });
		return { session, verdicts: judge(session, level) };
	} finally {
		await driven.close();
	}
}

const withResult = (verdicts: Verdict[], result: Verdict['result']) =>
	verdicts.filter((verdict) => verdict.result === result).map(({ id }) => id);
const value = (body: string, key: string) => Number(new RegExp(` ${key}=(\\d+)`).exec(body)?.[1]);
const replaced = (body: string, key: string, to: number) => body.replace(new RegExp(` ${key}=\\d+`), ` ${key}=${to}`);
const isKept = (body: string) => /^[TE] /.test(body);

describe('the core in front of the conformance host', () => {
	it.each<[Level, string]>([
		['full', ''],
		['basic', ''],
		['full', '--one-sensor --rep 50 --name lathe'],
		['full', '--stop-output both --retain --step 20'],
		['full', '--clock-us 4294962000000']
	])('passes every rule of level %s, with %j', async (level, options) => {
		const { session, verdicts } = await run(level, {}, options);
		expect(verdicts.filter(({ result }) => result !== 'pass')).toEqual([]);
		expect(verdicts.map(({ id }) => id)).toEqual(
			rules.filter((rule) => level === 'full' || rule.level === 'basic').map(({ id }) => id)
		);
		expect(session.endedMs).toBeLessThan(sessionMsMax);
	});

	it('where another host of the same boot counted its commands further', async () => {
		const driven = openDriven(core());
		try {
			driven.send([formatLine({ verb: 'SET', id: 2_000_000_000, b: '5C0E91A7', tgt: 9, look: 0, ease: 0, stop: 0 })]);
			const session = await play(driven, { level: 'full', firstId: 1000, tell: () => {} });
			expect(judge(session, 'full').filter(({ result }) => result !== 'pass')).toEqual([]);
			expect(session.entries.some(({ text }) => text.includes(` id=${2 ** 30 + 1010} `))).toBe(true);
		} finally {
			await driven.close();
		}
	});

	it('with several magnets a turn as well', async () => {
		// Four passages are one turn here.
		const { verdicts } = await run('full', {}, '--ppr 4', { turns: 40 });
		expect(verdicts.filter(({ result }) => result !== 'pass')).toEqual([]);
	});

	it('what nobody turned is not proved, and nothing is called wrong', async () => {
		const { session, verdicts } = await run('full', {}, '', { turns: 0 });
		expect(withResult(verdicts, 'fail')).toEqual([]);
		expect(withResult(verdicts, 'not-shown')).toEqual(
			expect.arrayContaining(['totals-grow', 'no-zeroing', 'speaks-turning', 'event-again'])
		);
		expect(isProved(verdicts)).toBe(false);
		expect(session.endedMs).toBeLessThanOrEqual(sessionMsMax);
	});
});

/** Gives lines numbers without gaps where some were swallowed. */
function renumber(swallow: (body: string) => boolean): (body: string) => string | null {
	const numbers = new Map<number, number>();
	let last = 0;
	return (body) => {
		const n = value(body, 'n');
		if (body.startsWith('HI ')) return replaced(body, 'n', last);
		if (!isKept(body)) return body;
		if (swallow(body)) return null;
		if (!numbers.has(n)) numbers.set(n, ++last);
		return replaced(body, 'n', numbers.get(n)!);
	};
}

/** Lines again that were heard before. */
function repeats(): (body: string) => boolean {
	const seen = new Set<string>();
	return (body) => {
		const again = body.startsWith('E ') && seen.has(body);
		seen.add(body);
		return again;
	};
}

const wrongs: [string, string[], () => Wrong][] = [
	[
		'that sets its totals to zero for each plan',
		['no-zeroing'],
		() => {
			let turns = 0;
			let zero = 0;
			const said = new Map<number, string>();
			return {
				into(text) {
					if (text.startsWith('SET ') && text.includes(' b=5C0E91A7 ')) zero = turns;
					return text;
				},
				out(body) {
					if (!body.includes(' f=')) return body;
					turns = Math.max(turns, value(body, 'f'));
					const zeroed = replaced(body, 'f', Math.max(0, value(body, 'f') - zero));
					if (!isKept(body)) return zeroed;
					const n = value(body, 'n');
					if (!said.has(n)) said.set(n, zeroed);
					return said.get(n)!;
				}
			};
		}
	],
	[
		'whose count falls now and then',
		['totals-grow'],
		() => ({
			out: (body) => (/^T .* f=8 /.test(body) ? replaced(body, 'f', 5) : body)
		})
	],
	[
		'that sends no event again unasked',
		['event-again'],
		() => {
			const again = repeats();
			let syncs = false;
			return {
				into(text) {
					syncs ||= text.startsWith('SYNC ');
					return text;
				},
				out: (body) => (again(body) && !syncs ? null : body)
			};
		}
	],
	['that does not know SYNC', ['answers-sync'], () => ({ into: (text) => (text.startsWith('SYNC ') ? null : text) })],
	[
		'that frees events by the number of the line',
		['own-ack-only'],
		() => {
			let last = 0;
			return {
				into: (text) => (text.startsWith('ACK ') ? withChecksum(replaced(text.slice(0, -6), 'e', last)) : text),
				out(body) {
					if (body.startsWith('E ')) last = Math.max(last, value(body, 'e'));
					return body;
				}
			};
		}
	],
	['that takes no acknowledgement', ['ack-frees'], () => ({ into: (text) => (text.startsWith('ACK ') ? null : text) })],
	[
		'that acts twice on one id',
		['acted-once'],
		() => {
			const ids = new Set<number>();
			const given = new Map<number, number>();
			return {
				into(text) {
					if (!text.startsWith('SET ')) return text;
					const id = value(text, 'id');
					if (!ids.has(id)) return ids.add(id) && text;
					given.set(id + 1, id);
					return withChecksum(replaced(text.slice(0, -6), 'id', id + 1));
				},
				out: (body) => (given.has(value(body, 'id')) ? replaced(body, 'id', given.get(value(body, 'id'))!) : body)
			};
		}
	],
	[
		'that answers a command only once',
		['answers-set'],
		() => {
			const answered = new Set<string>();
			return {
				out(body) {
					if (!body.startsWith('OK ')) return body;
					if (answered.has(body)) return null;
					answered.add(body);
					return body;
				}
			};
		}
	],
	[
		'that is silent while it stands',
		['speaks-standing'],
		() => ({
			out: renumber((body) => body.startsWith('T ') && body.includes(' r=0 '))
		})
	],
	[
		'whose line numbers repeat',
		['line-numbers'],
		() => ({
			out: (body) =>
				body.startsWith('T ') ? replaced(body, 'n', value(body, 'n') - ((value(body, 'n') + 1) % 2)) : body
		})
	],
	[
		'that leaves out line numbers',
		['line-numbers'],
		() => ({
			out: (body) => (isKept(body) || body.startsWith('HI ') ? replaced(body, 'n', value(body, 'n') * 2) : body),
			into: (text) =>
				text.startsWith('ACK ')
					? withChecksum(replaced(text.slice(0, -6), 'n', Math.floor(value(text, 'n') / 2)))
					: text
		})
	],
	[
		'that leaves out the number of an event',
		['event-numbers'],
		() => ({
			out: (body) => (value(body, 'e') > 1 ? replaced(body, 'e', value(body, 'e') + 1) : body),
			into(text) {
				const e = value(text, 'e');
				return /^(ACK|SYNC) /.test(text) && e > 2 ? withChecksum(replaced(text.slice(0, -6), 'e', e - 1)) : text;
			}
		})
	],
	[
		'that writes a repeated line anew',
		['same-again'],
		() => {
			const again = repeats();
			return { out: (body) => (again(body) ? replaced(body, 't', value(body, 't') + 1) : body) };
		}
	],
	[
		'that takes another boot number in the middle',
		['one-boot'],
		() => {
			let over = false;
			return {
				into(text) {
					over ||= text.includes(' id=1060 ');
					return text;
				},
				out: (body) => (over && body.startsWith('T ') ? body.replace('5C0E91A7', '5C0E91A8') : body)
			};
		}
	],
	[
		'that begins with a tick',
		['birth-first'],
		() => {
			let begun = false;
			return {
				out(body) {
					begun ||= isKept(body);
					return begun ? body : null;
				}
			};
		}
	],
	['that does not know ?', ['answers-ask', 'dropped-to-lf'], () => ({ into: (text) => (text === '?' ? null : text) })],
	[
		'that takes plans for any boot',
		['set-other-boot'],
		() => ({
			out: (body) =>
				body.startsWith('NO ') && value(body, 'id') === 1012 ? body.replace(/^NO (.*) why=boot$/, 'OK $1') : body
		})
	],
	[
		'that takes overtaken plans',
		['overtaken'],
		() => ({
			out: (body) => (body.startsWith('NO ') ? body.replace(/^NO (.*) why=old$/, 'OK $1') : body)
		})
	],
	[
		'that says OK to a STOP for another boot',
		['stop-other-boot'],
		() => ({
			out: (body) =>
				body.startsWith('NO ') && value(body, 'id') === 1024 ? body.replace(/^NO (.*) why=\w+$/, 'OK $1') : body
		})
	],
	[
		'that refuses keys it does not know',
		['unknown-key'],
		() => ({
			into: (text) => (/ zq=1 ~/.test(text) ? null : text)
		})
	],
	[
		'that is silent to verbs it does not know',
		['unknown-verb'],
		() => ({
			into: (text) => (text.startsWith('LAMP ') ? null : text)
		})
	],
	[
		'that looks at no checksum',
		['spoilt-not-acted'],
		() => ({
			into: (text) =>
				text.startsWith('SET ') && text.length < 150 && !/[^ -~]/.test(text)
					? withChecksum(text.replace(/ ~.{4}$/, ''))
					: text
		})
	],
	[
		'that loses the line behind one too long',
		['dropped-to-lf'],
		() => {
			let lost = false;
			return {
				into(text) {
					if (text.length > 159) {
						lost = true;
						return null;
					}
					if (!lost) return text;
					lost = false;
					return null;
				}
			};
		}
	],
	[
		'that promises more ticks than come',
		['speaks-turning'],
		() => ({
			out: (body) => body.replace(' rep=100', ' rep=50')
		})
	],
	[
		'that writes numbers in another way',
		['form'],
		() => ({
			out: (body) => (body.startsWith('T ') ? body.replace(' r=0 ', ' r=00 ') : body)
		})
	]
];

describe('a wrong winder fails by the name of its rule and by no other', () => {
	it.each(wrongs)('one %s', async (_what, expected, make) => {
		const { session, verdicts } = await run('full', make());
		expect(withResult(verdicts, 'fail')).toEqual(expected);
		for (const { lines } of verdicts) for (const no of lines) expect(session.entries[no - 1]!.no).toBe(no);
	});

	it.each<[string, Wrong]>([
		['computed as XMODEM', { sum: (body) => crcText(crc16Xmodem(body)) }],
		['of nothing', { sum: () => '0000' }]
	])('one whose checksum is %s, and the rest cannot be judged', async (_what, wrong) => {
		const { verdicts } = await run('full', wrong);
		expect(withResult(verdicts, 'fail')).toEqual(['checksum']);
		expect(withResult(verdicts, 'not-shown')).toHaveLength(rules.length - 2);
	});

	it('at level basic the rules of full are not asked', async () => {
		const again = repeats();
		const { verdicts } = await run('basic', {
			out: (body) => (again(body) ? null : body),
			into: (text) => (text.startsWith('SYNC ') ? null : text)
		});
		expect(withResult(verdicts, 'fail')).toEqual(['answers-sync']);
	});

	it('a winder without events passes level basic', async () => {
		const numbers = renumber((body) => body.startsWith('E '));
		const { verdicts } = await run('basic', {
			out: (body) => {
				const numbered = numbers(body);
				return numbered && replaced(numbered, 'e', 0);
			},
			into: (text) => (text.startsWith('SYNC ') ? null : text)
		});
		expect(withResult(verdicts, 'not-asked')).toEqual(['event-numbers', 'answers-sync', 'ack-frees']);
		expect(isProved(verdicts)).toBe(true);
	});
});

describe('npm run conformance', () => {
	let folder: string;
	beforeAll(() => (folder = mkdtempSync(join(tmpdir(), 'turnstead-conformance-'))));
	afterAll(() => rmSync(folder, { recursive: true }));

	const main = fileURLToPath(new URL('../../firmware-protocol/conformance/main.ts', import.meta.url));
	const command = async (...args: string[]) => {
		const child = spawn(process.execPath, ['--import', 'tsx', main, ...args], { stdio: ['ignore', 'pipe', 'pipe'] });
		let out = '';
		let said = '';
		child.stdout.setEncoding('utf8').on('data', (chunk: string) => (out += chunk));
		child.stderr.setEncoding('utf8').on('data', (chunk: string) => (said += chunk));
		const code = await new Promise((resolve) => child.on('close', resolve));
		return { code, out, said };
	};

	it('proves the core, writes the record and ends with 0', async () => {
		const record = join(folder, 'record');
		const { code, out, said } = await command('--exec', core(), '--driven', '--record', record);
		expect(out).toContain(`The winder keeps the rules of level full: ${rules.length} seen and kept.`);
		expect(said).toContain('10 turns were counted.');
		expect(readFileSync(record, 'utf8')).toMatch(/^ {3}1 .* s = the program was started\n {3}2 .* s → HI p=1 /);
		expect(code).toBe(0);
	});

	it('tells the rule that is broken with the lines of the record, and ends with 1', async () => {
		const program = join(folder, 'wrong.mjs');
		writeFileSync(
			program,
			`import { createInterface } from 'node:readline';
			console.log('HI p=1 dev=w-01 b=5C0E91A7 n=0 e=0 f=0 v=0 t=0 ~0000');
			for await (const order of createInterface({ input: process.stdin })) {
				const [, word] = / mark (\\w+)$/.exec(order) ?? [];
				if (word) console.log('# mark ' + word + ' b=5C0E91A7 f=0 v=0 kept=0');
			}`
		);
		const { code, out } = await command('--exec', `${process.execPath} ${program}`, '--driven');
		expect(out).toMatch(/^FAIL {6}checksum .*\n {10}the checksum is wrong.*\(line 2\)\n {3}2 .* → HI p=1 dev=w-01 /m);
		expect(out).toMatch(/^FAIL {6}speaks-standing /m);
		expect(code).toBe(1);
	});

	it.each([
		['no winder', [], 'Which winder?'],
		['two winders', ['--port', '/dev/ttyACM0', '--exec', 'true'], 'Which winder?'],
		['a level that is none', ['--exec', 'true', '--level', 'half'], '--level is basic or full, not half'],
		['a page of the web', ['--url', 'http://127.0.0.1/'], '--url wants an address to listen at'],
		['a program that is not there', ['--exec', './no-such-winder'], './no-such-winder could not be started']
	])('ends with 2 and a sentence at %s', async (_what, args, sentence) => {
		const { code, said } = await command(...args);
		expect(said).toContain(sentence);
		expect(code).toBe(2);
	});
});

describe('PROTOCOL.md', () => {
	it('names every rule with its sentence and its level', () => {
		const protocol = readFileSync(join(coreFolder, '..', 'PROTOCOL.md'), 'utf8');
		const rows = protocol
			.split('\n## Prove it\n')[1]!
			.split('\n## ')[0]!
			.matchAll(/^\| `([a-z-]+)` \| (.+) \| (basic|full) \|$/gm);
		expect([...rows].map(([, id, says, level]) => ({ id, says: says!.replaceAll('`', ''), level }))).toEqual(
			rules.map(({ id, says, level }) => ({ id, says, level }))
		);
	});
});
