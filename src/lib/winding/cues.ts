import type { Cue, CuePlan } from './types.ts';

/**
 * A look that nobody stood still for is over this many turns past its mark: past that the maker has decided to wind on,
 * and a blue screen would only hide the count.
 */
export const lookPassedAfterTurns = 30;

/** A cue comes again once the count has fallen this far below its mark, so that rocking on a mark does not repeat it. */
export const rearmTurns = 5;

/** The sound that prepares for a look comes this many turns before the look cue itself. */
export const lookComingTurns = 25;

export interface CuesNow {
	cue: Cue | null;
	/** The look mark that is due or ahead, in turns; null when none is left before the target. */
	nextLook: number | null;
	/** Turns at which the two cues of the target come. */
	easeAt: number;
	stopAt: number;
	/** target − turns; negative when over. */
	left: number;
}

/**
 * The first look mark beyond `done` turns, or null when none is left below the target's ease mark: so near the end the
 * stop at the target is the look.
 */
export function lookAfter(plan: CuePlan, done: number): number | null {
	const easeAt = easeMark(plan);
	const candidates: number[] = [];
	if (plan.firstLook > done) candidates.push(plan.firstLook);
	if (plan.lookEvery > 0) candidates.push((Math.floor(done / plan.lookEvery) + 1) * plan.lookEvery);
	const next = Math.min(...candidates);
	return next < easeAt ? next : null;
}

/** Never before half the coil: on a very short coil a long ease would cover all of it. */
function easeMark(plan: CuePlan): number {
	return Math.max(stopMark(plan) - Math.max(0, plan.easeEarlyTurns - plan.stopEarlyTurns), Math.ceil(plan.target / 2));
}

function stopMark(plan: CuePlan): number {
	return Math.max(plan.target - plan.stopEarlyTurns, Math.ceil(plan.target / 2));
}

/**
 * What the bench says at a count. One function for server, screen and simulator: no clock, no memory; what has been dealt
 * with is in the plan (`lookDone`).
 *
 * @param plan marks in turns of the run
 * @param turns turns on the bobbin, may be negative or over the target
 * @param turning whether the spindle turns; a standing spindle needs no `ease` and no `stop`
 */
export function cuesAt(plan: CuePlan, turns: number, turning: boolean): CuesNow {
	const easeAt = easeMark(plan);
	const stopAt = stopMark(plan);
	const left = plan.target - turns;
	const nextLook = lookAfter(plan, plan.lookDone);
	const marks = { nextLook, easeAt, stopAt, left };

	if (left < 0) return { ...marks, cue: 'over' };
	if (turns >= stopAt) return { ...marks, cue: turning ? 'stop' : null };
	if (turns >= easeAt) return { ...marks, cue: turning ? 'ease' : null };
	if (nextLook !== null) {
		// A look is called early by as much as a stop is: it is a stop.
		const calledAt = nextLook - Math.min(plan.stopEarlyTurns, Math.floor(nextLook / 2));
		if (turns >= calledAt) return { ...marks, cue: 'look' };
		if (turning && turns >= calledAt - lookComingTurns) return { ...marks, cue: 'look-coming' };
	}
	return { ...marks, cue: null };
}
