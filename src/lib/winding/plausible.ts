import type { Point } from './boot.ts';

/** Room above the highest speed: belts slip, clocks differ. */
const speedMargin = 1.25;
/** A turn may be counted at either end of the time between two lines. */
const slackTurns = 2;

/**
 * The most turns a spindle can make.
 *
 * @param elapsedMs device ms, or wall ms times the time scale, whichever is longer: a slow clock must not make a count look too fast
 */
export const turnsPossible = (rpmMax: number, elapsedMs: number): number =>
	(rpmMax / 60_000) * Math.max(0, elapsedMs) * speedMargin + slackTurns;

/** Below this a spindle may well stand still within one turn. */
const atSpeedRpm = 100;
/** Motor and spindle need longer than this to stand still: this much of the trail is looked at. */
const coastMs = 3_000;

/**
 * Whether the pulses ended at speed: the last turns came as fast as those before, and then none. A spindle cannot stop
 * within one turn, so the sensor has most likely lost its magnet. Judged only where lines are close enough to see a
 * coast-down.
 *
 * @param trail moments in order of time, the last one standing
 * @returns the speed at which the pulses ended, or null
 */
export function endedAtSpeed(trail: readonly Point[]): number | null {
	// Moments at which the count had grown, newest first: the time per turn between them is the speed, free of what
	// a device reports while it waits for a pulse that does not come.
	const grown: Point[] = [];
	for (let i = trail.length - 1; i > 0; i -= 1) {
		const point = trail[i]!;
		const before = trail[i - 1]!;
		if (point.f + point.v > before.f + before.v) grown.push(point);
		if (grown.length > 0 && grown[0]!.t - point.t > coastMs) break;
	}
	if (grown.length < 5) return null;
	const msPerTurn = (later: Point, earlier: Point) =>
		(later.t - earlier.t) / Math.max(1, later.f + later.v - earlier.f - earlier.v);
	const lastMs = msPerTurn(grown[0]!, grown[1]!);
	const beforeMs = msPerTurn(grown[1]!, grown[grown.length - 1]!);
	const rpm = 60_000 / beforeMs;
	// The last line before the silence may stand up to a report period after its pulse; hence a generous factor.
	if (rpm < atSpeedRpm || grown[0]!.t - grown[grown.length - 1]!.t < 500) return null;
	return lastMs <= beforeMs * 1.6 ? Math.round(rpm) : null;
}

/** A stretch of turning over which the speed said and the speed counted are compared. */
export interface PulseWindow {
	t: number;
	turns: number;
	rpmSum: number;
	rpmCount: number;
}

/** Long enough that a turn more or less does not matter. */
export const pulseWindowMs = 2_000;
/** Speeds said in that time: of fewer the mean says little, as when simulated time runs ahead of the lines. */
export const pulseSpeedsMin = 8;

/**
 * Speed counted against speed said: 2, ½ or 4 when the pulses per turn are set wrong, else null.
 */
export function pulsesOff(window: PulseWindow, t: number, turns: number): number | null {
	const elapsedMs = t - window.t;
	const said = window.rpmCount > 0 ? window.rpmSum / window.rpmCount : 0;
	if (elapsedMs < pulseWindowMs || window.rpmCount < pulseSpeedsMin || said < 30) return null;
	const counted = (Math.abs(turns - window.turns) / elapsedMs) * 60_000;
	for (const factor of [2, 0.5, 4]) {
		if (Math.abs(counted / (said * factor) - 1) < 0.12) return factor;
	}
	return null;
}
