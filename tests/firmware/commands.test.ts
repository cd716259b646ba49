import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { answersKeptMin, formatLine, stopVoidMs, withChecksum, type SetPlan } from '../../src/lib/turnline/index.ts';
import { cuesAt, lookPassedAfterTurns, rearmTurns } from '../../src/lib/winding/cues.ts';
import { Device, ordinaryDevice } from '../../simulator/device.ts';
import { randomFrom } from '../../simulator/random.ts';
import { Board, marksOf, withBoard } from './board.ts';

const b = '5C0E91A7';
const plan = (more: Partial<SetPlan> = {}): SetPlan => ({
	verb: 'SET',
	id: 17,
	b,
	tgt: 100,
	look: 0,
	ease: 10,
	stop: 3,
	...more
});
const answersOf = (texts: string[]) => texts.filter((text) => /^(OK|NO) /.test(text)).map((text) => text.slice(0, -6));

describe('commands', () => {
	it('are answered as often as they come and acted on once', () =>
		withBoard([], async (board) => {
			board.say(plan());
			board.turns(50);
			// The same number with another content is the same command: the plan in force stays.
			board.say(plan({ tgt: 60 }));
			board.say(plan());
			board.turns(60);
			const { texts, events } = await board.mark();
			expect(answersOf(texts)).toEqual(Array(3).fill(`OK b=${b} id=17`));
			expect(marksOf(events)).toContainEqual(['at', 100]);
		}));

	it(`the last ${answersKeptMin} are remembered`, () =>
		withBoard([], async (board) => {
			for (let id = 1; id <= answersKeptMin; id++) board.say(plan({ id, tgt: 100 + id }));
			await board.mark();
			board.say(plan({ id: 1, tgt: 500 }));
			expect(answersOf((await board.mark()).texts)).toEqual([`OK b=${b} id=1`]);
		}));

	it('for another boot are answered so and change nothing', () =>
		withBoard([], async (board) => {
			board.say(plan());
			await board.mark();
			board.say(plan({ id: 18, b: '77AA01F3', tgt: 20 }));
			board.turns(30);
			const { texts, events } = await board.mark();
			expect(answersOf(texts)).toEqual([`NO b=${b} id=18 why=boot`]);
			expect(marksOf(events)).toEqual([]);
		}));

	it('a plan overtaken on the way by a newer one does not replace it', () =>
		withBoard([], async (board) => {
			board.say(plan({ id: 18, tgt: 40 }));
			await board.mark();
			board.say(plan({ id: 17, tgt: 20 }));
			expect(answersOf((await board.mark()).texts)).toEqual([`NO b=${b} id=17 why=old`]);
			board.turns(41);
			expect(marksOf((await board.mark()).events)).toContainEqual(['at', 40]);
		}));

	it('numbers of commands wrap: a small one after a large one is newer', () =>
		withBoard([], async (board) => {
			board.say(plan({ id: 4_294_967_290 }));
			board.say(plan({ id: 3, tgt: 200 }));
			board.say(plan({ id: 4_294_967_295, tgt: 300 }));
			const answers = answersOf((await board.mark()).texts);
			expect(answers).toContain(`OK b=${b} id=3`);
			expect(answers).toContain(`NO b=${b} id=4294967295 why=old`);
		}));

	it.each([
		['longer than ten million turns', formatLine(plan({ tgt: 10_000_001 }))],
		['as far as i32 reaches', formatLine(plan({ tgt: 2_147_483_647, from: -2_147_483_648 }))],
		['beyond its range', withChecksum(`SET id=17 b=${b} tgt=99999999999 look=0 ease=1 stop=1`)],
		['at its own zero', withChecksum(`SET id=17 b=${b} tgt=7 look=0 ease=1 stop=1 from=7`)]
	])('a plan the device cannot hold is refused: %s', (_what, text) =>
		withBoard([], async (board) => {
			board.say(text);
			expect(answersOf((await board.mark()).texts)).toEqual([`NO b=${b} id=17 why=range`]);
		})
	);

	it('a verb not known is answered; what has no good checksum is not', () =>
		withBoard([], async (board) => {
			await board.mark();
			board.say(withChecksum('LAMP on=1'));
			board.say(withChecksum('T b=5C0E91A7 n=1'));
			expect(answersOf((await board.mark()).texts)).toEqual(Array(2).fill(`NO b=${b} why=verb`));
			board.say('LAMP on=1');
			board.say(formatLine(plan()).replace(/.$/, (digit) => (digit === '0' ? '1' : '0')));
			board.say(`# ${formatLine(plan())}`);
			board.say('\u0001\u0002 noise');
			board.say('x'.repeat(400));
			expect((await board.mark()).texts).toEqual([]);
			board.say('?');
			expect((await board.mark()).lines.map((line) => line.verb)).toEqual(['HI']);
		}));
});

describe('the stop output', () => {
	const wired = ['--stop-output', 'command'];

	it('asks until the spindle has stood, for two seconds at least, and once for one command', () =>
		withBoard(wired, async (board) => {
			board.turns(20);
			board.say({ verb: 'STOP', id: 5, b });
			board.turns(40);
			expect((await board.mark()).reports).toEqual(['stop 1']);
			board.wait(3000);
			expect((await board.mark()).reports).toEqual(['stop 0']);
			board.turns(10);
			board.say({ verb: 'STOP', id: 5, b });
			const { reports, texts } = await board.mark();
			expect(reports).toEqual([]);
			expect(answersOf(texts)).toEqual([`OK b=${b} id=5`]);
		}));

	it(`while the spindle stands it asks for ${stopVoidMs} ms`, () =>
		withBoard(wired, async (board) => {
			board.say('STOP');
			board.wait(stopVoidMs - 50);
			expect((await board.mark()).reports).toEqual(['stop 1']);
			board.wait(100);
			expect((await board.mark()).reports).toEqual(['stop 0']);
		}));

	it('heeds no stop for another boot', () =>
		withBoard(wired, async (board) => {
			board.turns(20);
			board.say({ verb: 'STOP', id: 5, b: '77AA01F3' });
			board.say({ verb: 'STOP', b: '77AA01F3' });
			const { reports, texts } = await board.mark();
			expect(reports).toEqual([]);
			expect(answersOf(texts).sort()).toEqual([`NO b=${b} id=5 why=boot`, `NO b=${b} why=boot`]);
		}));

	it('that nobody wired is told, and never claimed', () =>
		withBoard([], async (board) => {
			board.turns(20);
			board.say({ verb: 'STOP', id: 5, b });
			board.say('STOP');
			const { reports, texts } = await board.mark();
			expect(reports).toEqual([]);
			expect(answersOf(texts).sort()).toEqual([`NO b=${b} id=5 why=unwired`, `NO b=${b} why=unwired`]);
		}));

	it('asks at the stop mark of the plan where the maker chose so, as long as the spindle turns', () =>
		withBoard(['--stop-output', 'mark'], async (board) => {
			board.say(plan({ tgt: 30 }));
			board.turns(26);
			expect((await board.mark()).reports).not.toContain('stop 1');
			board.turns(1);
			expect((await board.mark()).reports).toContain('stop 1');
			board.wait(1000);
			expect((await board.mark()).reports).toContain('stop 0');
		}));

	it('asks when the host is silent only where the maker opted in, and only while turning', () =>
		withBoard([...wired, '--watchdog', '2000'], async (board) => {
			board.wait(5000);
			expect((await board.mark()).reports).toEqual([]);
			board.say({ verb: 'ACK', b, n: 0, e: 0 });
			board.turns(15);
			expect((await board.mark()).reports).toEqual([]);
			board.turns(10);
			expect((await board.mark()).reports).toEqual(['stop 1']);
			board.say({ verb: 'ACK', b, n: 0, e: 0 });
			expect((await board.mark()).reports).toEqual(['stop 0']);
		}));

	it('no silence of the host stops a winder that did not opt in', () =>
		withBoard(wired, async (board) => {
			board.turns(300);
			expect((await board.mark()).reports).toEqual([]);
		}));
});

describe('cues called by the device', () => {
	it('each mark is an event with its count, and the lamp follows', () =>
		withBoard([], async (board) => {
			board.say(plan({ tgt: 100, look: 40, fst: 10, ease: 12, stop: 3 }));
			board.turns(103);
			const { events, reports } = await board.mark();
			// Nobody stood still at the looks: each is over 30 turns past its mark, and the next is ahead.
			expect(marksOf(events)).toEqual([
				['look', 7],
				['look', 41],
				['look', 77],
				['ease', 88],
				['at', 100],
				['over', 101]
			]);
			expect(reports).toEqual(['cue look', 'cue none', 'cue look', 'cue ease', 'cue stop', 'cue over']);
		}));

	it('a mark comes again once the count has fallen five turns below it, and not before', () =>
		withBoard([], async (board) => {
			board.say(plan({ tgt: 50, ease: 3, stop: 3 }));
			board.turns(50);
			board.turns(rearmTurns - 1, 100, false);
			board.turns(rearmTurns - 1);
			expect(marksOf((await board.mark()).events)).toEqual([
				['ease', 47],
				['at', 50]
			]);
			board.turns(rearmTurns, 100, false);
			board.turns(rearmTurns);
			expect(marksOf((await board.mark()).events)).toEqual([['at', 50]]);
		}));

	it('a look that was stood at is taken: the lamp goes out and the next is ahead', () =>
		withBoard([], async (board) => {
			board.say(plan({ look: 40 }));
			board.turns(38);
			expect((await board.mark()).reports).toEqual(['cue look']);
			board.wait(2000);
			expect((await board.mark()).reports).toEqual(['cue none']);
			board.turns(39);
			const { events, reports } = await board.mark();
			expect(marksOf(events)).toEqual([['look', 77]]);
			expect(reports).toEqual(['cue look']);
		}));

	it('a look comes again when it was taken and the count falls well below where it is called', () =>
		withBoard([], async (board) => {
			board.say(plan({ look: 40 }));
			board.turns(38);
			board.wait(2000);
			board.turns(6, 100, false);
			board.turns(6);
			await board.mark();
			expect(marksOf([...board.events.values()])).toEqual([
				['look', 37],
				['look', 37]
			]);
		}));

	it('a coil wound so that the net falls has its marks too', () =>
		withBoard([], async (board) => {
			board.turns(5);
			board.say(plan({ tgt: -35, from: 5, ease: 10, stop: 2, look: 15 }));
			await board.mark();
			board.turns(42, 100, false);
			expect(marksOf((await board.mark()).events)).toEqual([
				['look', 5 - 13],
				['ease', 5 - 30],
				['at', 5 - 40],
				['over', 5 - 41]
			]);
		}));

	it('a target moved below the count is over at once', () =>
		withBoard([], async (board) => {
			board.say(plan({ tgt: 100 }));
			board.turns(60);
			expect(marksOf((await board.mark()).events)).toEqual([]);
			board.say(plan({ id: 18, tgt: 50 }));
			expect(marksOf((await board.mark()).events)).toEqual([
				['ease', 60],
				['at', 60],
				['over', 60]
			]);
		}));

	it('the same coil told again calls nothing twice', () =>
		withBoard([], async (board) => {
			board.say(plan({ tgt: 50, look: 20 }));
			board.turns(50);
			await board.mark();
			board.say(plan({ id: 18, tgt: 50, look: 20 }));
			expect(marksOf((await board.mark()).events)).toEqual([]);
		}));

	it('without a plan nothing is called', () =>
		withBoard([], async (board) => {
			board.turns(50);
			const { events, reports } = await board.mark();
			expect([...marksOf(events), ...reports]).toEqual([]);
		}));

	const anyPlan = fc.record({
		target: fc.oneof(fc.integer({ min: 1, max: 40 }), fc.integer({ min: 1, max: 300 })),
		look: fc.oneof(fc.constant(0), fc.integer({ min: 1, max: 150 }), fc.constant(4_294_967_295)),
		fst: fc.oneof(fc.constant(0), fc.integer({ min: 1, max: 80 })),
		ease: fc.oneof(fc.integer({ min: 0, max: 60 }), fc.constant(4_294_967_295)),
		stop: fc.oneof(fc.integer({ min: 0, max: 20 }), fc.constant(4_294_967_295))
	});

	it('are those of the bench at every count, for any plan', async () => {
		await fc.assert(
			fc.asyncProperty(anyPlan, fc.boolean(), async ({ target, look, fst, ease, stop }, back) =>
				withBoard([], async (board) => {
					board.say(plan({ tgt: back ? -target : target, look, fst, ease, stop }));
					let lookDone = 0;
					let now = 'none';
					for (let turns = 1; turns <= target + 3; turns++) {
						board.turn(100, !back);
						const { reports } = await board.mark();
						now = reports.at(-1)?.replace('cue ', '') ?? now;
						const cue = { target, lookEvery: look, firstLook: fst, easeEarlyTurns: ease, stopEarlyTurns: stop };
						for (;;) {
							const { nextLook } = cuesAt({ ...cue, lookDone }, turns, true);
							if (nextLook === null || turns <= nextLook + lookPassedAfterTurns) break;
							lookDone = nextLook;
						}
						const at = cuesAt({ ...cue, lookDone }, turns, true);
						expect([turns, now]).toEqual([turns, at.cue === 'look-coming' ? 'none' : (at.cue ?? 'none')]);
					}
				})
			),
			{ numRuns: 25 }
		);
	});

	it('come as events at the turns at which the simulated winder calls them', async () => {
		const stretch = fc.record({ turns: fc.integer({ min: 1, max: 90 }), stand: fc.boolean() });
		await fc.assert(
			fc.asyncProperty(anyPlan, fc.array(stretch, { minLength: 1, maxLength: 6 }), async (given, stretches) =>
				withBoard([], async (board) => {
					const { target, ...rest } = given;
					const set = plan({ tgt: target, ...rest });
					const called: [string, number][] = [];
					const device = new Device({ ...ordinaryDevice }, randomFrom(1, 'device'), 0, {
						event: (event) => called.push(...marksOf([event]))
					});
					device.hear(formatLine({ ...set, b: device.boot }), 0);
					board.say(set);
					await board.mark();
					await wind(board, device, stretches);
					const own = [...board.events.values()].sort((one, other) => one.e - other.e);
					expect(marksOf(own)).toEqual(called);
				})
			),
			{ numRuns: 30 }
		);
	});
});

/** The same passages for both, at the same times. */
async function wind(board: Board, device: Device, stretches: { turns: number; stand: boolean }[]): Promise<void> {
	for (const { turns, stand } of stretches) {
		for (let turn = 0; turn < turns; turn++) {
			const from = board.nowMs;
			board.turn(100);
			for (const [at, [channel, on]] of (
				[
					['A', true],
					['B', true],
					['A', false],
					['B', false]
				] as const
			).entries())
				device.edge({ atMs: from + 90 + 2.5 * (at + 1), channel, on });
			device.pass(board.nowMs);
		}
		if (stand) {
			board.wait(1500);
			device.pass(board.nowMs);
		}
		// As a host would: otherwise the ring runs over in the longer ones.
		const { lines } = await board.mark();
		const last = lines.filter((line) => line.verb === 'T' || line.verb === 'E').at(-1);
		if (last) board.say({ verb: 'ACK', b: last.b, n: last.n, e: last.e });
	}
	await board.mark();
}
