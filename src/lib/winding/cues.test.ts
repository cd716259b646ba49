import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { cuesAt, lookAfter } from './cues.ts';
import { linkStateOf } from './link.ts';
import type { CuePlan } from './types.ts';

const plan: CuePlan = {
	target: 5320,
	lookEvery: 500,
	firstLook: 100,
	easeEarlyTurns: 40,
	stopEarlyTurns: 3,
	lookDone: 0
};

describe('the cue at a count', () => {
	it.each([
		[0, null],
		[71, null],
		[72, 'look-coming'],
		[97, 'look'],
		[104, 'look'],
		[5279, null],
		[5280, 'ease'],
		[5316, 'ease'],
		[5317, 'stop'],
		[5320, 'stop'],
		[5321, 'over']
	] as const)('at %i turns turning is %s', (turns, cue) => {
		const lookDone = turns > 200 ? 5000 : 0;
		expect(cuesAt({ ...plan, lookDone }, turns, true).cue).toBe(cue);
	});

	it('asks nothing of a standing spindle but a look, and says over', () => {
		expect(cuesAt({ ...plan, lookDone: 5000 }, 5290, false).cue).toBeNull();
		expect(cuesAt({ ...plan, lookDone: 5000 }, 5320, false).cue).toBeNull();
		expect(cuesAt({ ...plan, lookDone: 5000 }, 5325, false).cue).toBe('over');
		expect(cuesAt(plan, 101, false).cue).toBe('look');
	});

	it('finds the looks at 100, 500, 1,000 and none inside the ease', () => {
		const marks: number[] = [];
		for (let next = lookAfter(plan, 0); next !== null; next = lookAfter(plan, next)) marks.push(next);
		expect(marks).toEqual([100, 500, 1000, 1500, 2000, 2500, 3000, 3500, 4000, 4500, 5000]);
		expect(lookAfter({ ...plan, target: 520, firstLook: 0 }, 0)).toBeNull();
	});

	it('leaves half of a very short coil without ease or stop', () => {
		const short = { ...plan, target: 10, lookEvery: 0, firstLook: 0 };
		expect(cuesAt(short, 4, true).cue).toBeNull();
		expect(cuesAt(short, 7, true).cue).toBe('stop');
	});

	it('only ever tightens as the count rises', () => {
		const rank = { null: 0, ease: 1, stop: 2, over: 3 };
		fc.assert(
			fc.property(
				fc.integer({ min: 1, max: 20_000 }),
				fc.integer({ min: 0, max: 500 }),
				fc.integer({ min: 0, max: 100 }),
				fc.integer({ min: 0, max: 21_000 }),
				(target, easeEarlyTurns, stopEarlyTurns, turns) => {
					const bare = { target, lookEvery: 0, firstLook: 0, easeEarlyTurns, stopEarlyTurns, lookDone: 0 };
					const now = String(cuesAt(bare, turns, true).cue) as keyof typeof rank;
					const next = String(cuesAt(bare, turns + 1, true).cue) as keyof typeof rank;
					expect(rank[next]).toBeGreaterThanOrEqual(rank[now]);
					expect(cuesAt(bare, target, true).cue).toBe('stop');
					expect(cuesAt(bare, target + 1, true).cue).toBe('over');
				}
			)
		);
	});
});

describe('the link', () => {
	it.each([
		[null, true, 'never'],
		[0, true, 'live'],
		[1_499, true, 'live'],
		[1_500, true, 'old'],
		[1_500, false, 'live'],
		[2_500, false, 'old'],
		[3_000, true, 'no-signal'],
		[5_000, false, 'no-signal']
	] as const)('%s ms after the last line, turning %s, is %s', (ageMs, turning, state) => {
		expect(linkStateOf(ageMs, turning)).toBe(state);
	});
});
