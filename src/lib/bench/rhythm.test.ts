import { describe, expect, it } from 'vitest';
import { aView, aRun } from './example-view.ts';
import {
	countMarkPassed,
	countTick,
	easeTick,
	easeTickEveryMs,
	kept,
	lookComing,
	lookNow,
	noSignal,
	overTicks,
	overTickEveryMs,
	stop,
	stopMsMax,
	test as testTone,
	type Tone
} from './rhythm.ts';

const pitches = (tones: readonly Tone[]) => tones.map(({ hz }) => hz);
const apart = (tones: readonly Tone[]) =>
	tones.every((one, i) => i === 0 || one.atMs >= tones[i - 1]!.atMs + tones[i - 1]!.lengthMs);

describe('rhythms', () => {
	it('a look coming is short short, a look now short short long', () => {
		expect(pitches(lookComing)).toEqual([660, 880]);
		expect(pitches(lookNow)).toEqual([660, 880, 880]);
		expect(lookNow[2]!.lengthMs).toBeGreaterThan(2.5 * lookNow[0]!.lengthMs);
		expect(lookComing[0]!.lengthMs).toBe(lookComing[1]!.lengthMs);
	});

	it('stop is high low three times, then steady to five seconds', () => {
		expect(pitches(stop)).toEqual([988, 494, 988, 494, 988, 494, 988]);
		const last = stop.at(-1)!;
		expect(last.atMs + last.lengthMs).toBe(stopMsMax);
		expect(last.lengthMs).toBeGreaterThan(3_000);
	});

	it('ease ticks two to four times a second as the stop nears', () => {
		expect(pitches(easeTick)).toEqual([784]);
		expect(easeTickEveryMs(0)).toBe(500);
		expect(easeTickEveryMs(0.5)).toBeCloseTo(333.3, 1);
		expect(easeTickEveryMs(1)).toBe(250);
		expect(easeTickEveryMs(7)).toBe(250);
	});

	it('over ticks once per turn, ten at most, and never again for a turn already heard', () => {
		expect(overTicks(3, 0).map(({ atMs }) => atMs)).toEqual([0, overTickEveryMs, 2 * overTickEveryMs]);
		expect(overTicks(3, 2)).toHaveLength(1);
		expect(overTicks(3, 3)).toHaveLength(0);
		expect(overTicks(37, 0)).toHaveLength(10);
		expect(overTicks(37, 10)).toHaveLength(0);
		expect(pitches(overTicks(1, 0))).toEqual([494]);
	});

	it('no signal is long, a gap, long, and rough', () => {
		expect(pitches(noSignal)).toEqual([440, 440]);
		expect(noSignal[1]!.atMs).toBe(noSignal[0]!.lengthMs * 2);
		expect(noSignal.every(({ rough }) => rough)).toBe(true);
	});

	it('kept is one soft tone, counting a softer tick, lower at 500', () => {
		expect(kept).toHaveLength(1);
		expect(kept[0]!.level).toBeLessThan(0.5);
		expect(pitches(countTick(false))).toEqual([700]);
		expect(pitches(countTick(true))).toEqual([350]);
	});

	it('no two tones of a rhythm run into each other', () => {
		for (const tones of [lookComing, lookNow, stop, noSignal, testTone, overTicks(10, 0)])
			expect(apart(tones)).toBe(true);
	});

	it('the test tone is none of the cues', () => {
		for (const cue of [lookComing, lookNow, stop, kept, noSignal]) expect(pitches(testTone)).not.toEqual(pitches(cue));
	});
});

describe('counting tick', () => {
	const at = (onBobbin: number, runId = 'run-1') => aView({ run: aRun({ runId, onBobbin, turns: onBobbin }) });

	it('comes at each hundred and is low at each five hundred', () => {
		expect(countMarkPassed(at(3_399), at(3_400))).toBe('high');
		expect(countMarkPassed(at(3_498), at(3_503))).toBe('low');
		expect(countMarkPassed(at(3_400), at(3_450))).toBeNull();
	});

	it('is silent after a leap, backwards, and into another run', () => {
		expect(countMarkPassed(at(3_000), at(3_300))).toBeNull();
		expect(countMarkPassed(at(3_400), at(3_399))).toBeNull();
		expect(countMarkPassed(at(3_399), at(3_400, 'run-2'))).toBeNull();
		expect(countMarkPassed(null, at(3_400))).toBeNull();
	});
});
