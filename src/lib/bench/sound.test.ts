import { describe, expect, it } from 'vitest';
import type { SoundNow } from './present.ts';
import { lookNow, noSignal, stop } from './rhythm.ts';
import { nextSounds, silent, type PlayerState } from './sound.ts';

const sound = (cue: SoundNow['cue'], part: Partial<SoundNow> = {}): SoundNow => ({
	cue,
	key: `run-1 ${cue}`,
	nearness: 0,
	over: 0,
	...part
});

/** Follows a sound every 100 ms of the audio clock from `fromMs`; gives the begin times of all rhythms. */
function follow(now: SoundNow, forMs: number, state: PlayerState = silent, fromMs = 0) {
	const begun: { atMs: number; hz: number }[] = [];
	for (let clockMs = fromMs; clockMs < fromMs + forMs; clockMs += 100) {
		const step = nextSounds(state, now, clockMs);
		state = step.state;
		for (const { atMs, tones } of step.begin)
			for (const tone of tones) begun.push({ atMs: atMs + tone.atMs, hz: tone.hz });
	}
	return { begun, state };
}

describe('what begins to sound', () => {
	it('a look sounds once, however long it stays', () => {
		expect(follow(sound('look'), 5_000).begun).toHaveLength(lookNow.length);
	});

	it('the next look sounds anew', () => {
		const { state } = follow(sound('look', { key: 'run-1 look 500' }), 1_000);
		expect(nextSounds(state, sound('look', { key: 'run-1 look 1000' }), 1_000).begin).toHaveLength(1);
	});

	it('ease ticks twice a second at first and four times near the stop, evenly', () => {
		expect(follow(sound('ease'), 4_000).begun.length).toBeGreaterThanOrEqual(8);
		expect(follow(sound('ease'), 4_000).begun.length).toBeLessThanOrEqual(9);
		const fast = follow(sound('ease', { nearness: 1 }), 4_000).begun;
		expect(fast.length).toBeGreaterThanOrEqual(16);
		const gaps = fast.slice(2).map(({ atMs }, i) => atMs - fast[i + 1]!.atMs);
		expect(gaps.every((gap) => gap === 250)).toBe(true);
	});

	it('ease that paused for the page does not make up for its ticks', () => {
		const { state } = follow(sound('ease'), 500);
		expect(nextSounds(state, sound('ease'), 20_000).begin.length).toBeLessThanOrEqual(1);
	});

	it('stop sounds once and is cut off when the spindle stands', () => {
		const { begun, state } = follow(sound('stop'), 3_000);
		expect(begun).toHaveLength(stop.length);
		expect(nextSounds(state, sound('quiet', { key: 'quiet' }), 3_000)).toMatchObject({ cut: true, begin: [] });
	});

	it('over after stop only adds its ticks, one a turn, ten at most', () => {
		let { state } = follow(sound('stop'), 300);
		const ticks: number[] = [];
		for (let over = 1; over <= 14; over += 1) {
			const step = nextSounds(state, sound('over', { over }), 300 + over * 150);
			state = step.state;
			expect(step.cut).toBe(false);
			ticks.push(...step.begin.flatMap(({ tones }) => tones.map(({ hz }) => hz)));
		}
		expect(ticks).toEqual(Array.from({ length: 10 }, () => 494));
	});

	it('over without a stop before it sounds the stop first', () => {
		const { begun } = follow(sound('over', { over: 2 }), 1_000);
		expect(begun.map(({ hz }) => hz).slice(0, 7)).toEqual(stop.map(({ hz }) => hz));
		expect(begun).toHaveLength(stop.length + 2);
	});

	it('no signal comes again every five seconds', () => {
		const begun = follow(sound('no-signal'), 11_000).begun;
		expect(begun).toHaveLength(3 * noSignal.length);
		expect(begun[2]!.atMs - begun[0]!.atMs).toBeGreaterThanOrEqual(5_000);
		expect(begun[2]!.atMs - begun[0]!.atMs).toBeLessThan(5_200);
	});

	it('quiet begins nothing and cuts what sounded', () => {
		const { state } = follow(sound('look'), 100);
		expect(nextSounds(state, sound('quiet'), 100)).toMatchObject({ cut: true, begin: [] });
		expect(nextSounds(silent, sound('quiet', { key: 'quiet' }), 0)).toMatchObject({ cut: false, begin: [] });
	});
});
