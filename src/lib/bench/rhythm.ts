import type { LiveView } from '../winding/types.ts';

/** One tone of a rhythm. Times in ms from the rhythm's beginning. */
export interface Tone {
	atMs: number;
	lengthMs: number;
	hz: number;
	/** Part of the volume chosen. */
	level: number;
	/** Two tones that beat against each other. */
	rough: boolean;
}

/** Each tone rises and falls this long, so that it does not click. */
export const rampMs = 10;

const shortMs = 120;
const longMs = 450;
const gapMs = 90;

const tone = (atMs: number, lengthMs: number, hz: number, level = 1, rough = false): Tone => ({
	atMs,
	lengthMs,
	hz,
	level,
	rough
});

/** The rhythm of a look coming: short short. */
export const lookComing: readonly Tone[] = [tone(0, shortMs, 660), tone(shortMs + gapMs, shortMs, 880)];

/** A look now: short short long. */
export const lookNow: readonly Tone[] = [...lookComing, tone(2 * (shortMs + gapMs), longMs, 880)];

const stopHalfMs = 150;
const stopPairs = 3;
/** The steady tone of stop ends after this, still or not. */
export const stopMsMax = 5_000;

/** Stop: (high low) ×3, then steady; the player cuts it off when the spindle stands. */
export const stop: readonly Tone[] = [
	...Array.from({ length: stopPairs }, (_, i) => [
		tone(2 * i * stopHalfMs, stopHalfMs, 988),
		tone((2 * i + 1) * stopHalfMs, stopHalfMs, 494)
	]).flat(),
	tone(2 * stopPairs * stopHalfMs, stopMsMax - 2 * stopPairs * stopHalfMs, 988)
];

/** One tick of easing off. */
export const easeTick: readonly Tone[] = [tone(0, 45, 784)];

/** Ms from one ease tick to the next: two a second at first, four as the stop nears. */
export function easeTickEveryMs(nearness: number): number {
	return 1000 / (2 + 2 * Math.min(1, Math.max(0, nearness)));
}

/** Ticks for turns over are no more than this in all. */
export const overTicksMax = 10;
const overTickMs = 60;
export const overTickEveryMs = 200;

/** One tick per turn over, from the tick after `heard` on. */
export function overTicks(over: number, heard: number): readonly Tone[] {
	const count = Math.max(0, Math.min(over, overTicksMax) - heard);
	return Array.from({ length: count }, (_, i) => tone(i * overTickEveryMs, overTickMs, 494));
}

/** No signal: long gap long, every 5 s while it lasts. */
export const noSignalEveryMs = 5_000;
export const noSignal: readonly Tone[] = [tone(0, longMs, 440, 0.8, true), tone(2 * longMs, longMs, 440, 0.8, true)];

/** Kept: one soft. */
export const kept: readonly Tone[] = [tone(0, 180, 1320, 0.4)];

/** Heard once at the first tap: a rise that is none of the cues. */
export const test: readonly Tone[] = [tone(0, 200, 660), tone(250, 200, 880), tone(500, 300, 1320)];

const countTickEvery = 100;
const countTickLowEvery = 500;

/** The soft tick of counting on, lower at each 500; silence means trouble. */
export const countTick = (low: boolean): readonly Tone[] => [tone(0, 50, low ? 350 : 700, 0.25)];

/**
 * Whether a mark of counting was passed between two states of the same run. A leap over more than one mark is a replay or
 * a repair and ticks nothing.
 *
 * @returns 'low' at a multiple of 500, 'high' at another of 100, null otherwise
 */
export function countMarkPassed(before: LiveView | null, after: LiveView): 'high' | 'low' | null {
	if (!before?.run || !after.run || before.run.runId !== after.run.runId) return null;
	const from = Math.floor(before.run.onBobbin / countTickEvery);
	const to = Math.floor(after.run.onBobbin / countTickEvery);
	if (to !== from + 1) return null;
	return (to * countTickEvery) % countTickLowEvery === 0 ? 'low' : 'high';
}
