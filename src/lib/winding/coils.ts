import { undoMs } from './acts.ts';
import type { Point } from './boot.ts';
import { follow } from './follow.ts';
import { followMarks } from './looks.ts';
import { newStretch, newRun, signOf } from './run.ts';
import { type WinderState, draft, say, onBobbinNow, ask } from './state.ts';
import type { CoilPlan, Fact, WinderConfig } from './types.ts';

/** Coils on and off the bench. */

/** A rest longer than this begins a new session, and with it an early look. */
const sessionRestMs = 4 * 3_600_000;
/** The first look of a session. Common practice, no source. */
export const firstLookTurns = 100;

/**
 * Puts a coil on the bench: it becomes the run, or the one up next while a kept run can still be undone.
 *
 * Zero lies where the run before ended if that was just now, where the spindle last began to move if it is turning, and
 * else here.
 */
export function takeCoil(
	state: WinderState,
	config: WinderConfig,
	coil: { runId: string; plan: CoilPlan; sticker: string },
	now: number
): { state: WinderState; facts: Fact[] } {
	const d = draft(state, config, now);
	const { s } = d;
	const fresh = s.lastEndedAt === null || now - s.lastEndedAt > sessionRestMs;
	const { target } = coil.plan;
	const run = newRun(coil.runId, coil.plan, coil.sticker, now, firstLookOf(coil.plan, fresh));

	const boot = s.boots[0];
	if (boot) {
		const zero = { f: boot.f, v: boot.v };
		if (s.end && s.end.b === boot.b && now - s.end.at <= undoMs) {
			zero.f = s.end.f;
			zero.v = s.end.v;
			run.moves = s.end.moves.slice();
		} else if (boot.turning) {
			const go = s.trail.findLast((point) => point.k === 'go');
			if (go) {
				zero.f = go.f;
				zero.v = go.v;
			}
		}
		run.stretches.push(newStretch(boot, signOf(run.plan, config), zero, config.timeScale));
	}
	if (s.run && s.run.undoUntil !== null) s.upNext = run;
	else {
		s.run = run;
		s.end = null;
		s.idle = null;
	}
	say(d, 'taken', now, { runId: run.runId, turns: null, detail: { coil: run.plan.name, target } });
	if (boot) {
		const point: Point = { t: boot.t, f: boot.f, v: boot.v, r: boot.r, k: null, e: boot.e };
		follow(d, boot, point, boot.turning, 0);
	}
	return { state: s, facts: d.facts };
}

/**
 * The early look of a coil, 0 for none: the one its plan asks for, or the usual one on a session's first coil. Only where it
 * comes before the interval would bring one anyway, and in the first half of the coil. A plan that asks for none by interval
 * has one only where it says so.
 */
function firstLookOf({ firstLook, lookEvery, target }: CoilPlan, fresh: boolean): number {
	const first = firstLook ?? (fresh && lookEvery > 0 ? firstLookTurns : 0);
	return (lookEvery === 0 || first < lookEvery) && 2 * first < target ? first : 0;
}

/** No coil on the bench and none up next. */
export const wantsCoil = (state: WinderState): boolean =>
	(state.run === null || state.run.status !== 'open') && state.upNext === null;

/** Takes a coil that has not turned off the bench again. null when there is none. */
export function dropWaiting(state: WinderState): { state: WinderState; runId: string; coilId: string } | null {
	const run = state.upNext ?? state.run;
	if (!run || run.status !== 'open' || run.startedAt !== null || run.pending) return null;
	const next = state.upNext ? { ...state, upNext: null } : { ...state, run: null };
	return { state: next, runId: run.runId, coilId: run.plan.coilId };
}

/** The coil on the bench was edited. null when it is not on this bench. */
export function changePlan(
	state: WinderState,
	config: WinderConfig,
	plan: CoilPlan,
	now: number
): { state: WinderState; facts: Fact[] } | null {
	const d = draft(state, config, now);
	const run = [d.s.run, d.s.upNext].find((known) => known?.status === 'open' && known.plan.coilId === plan.coilId);
	if (!run) return null;
	// A coil that has begun keeps its direction: the wire on the bobbin will not turn round.
	run.plan = run.startedAt === null ? plan : { ...plan, direction: run.plan.direction, topFaces: run.plan.topFaces };
	if (run.startedAt === null) {
		for (const stretch of run.stretches) stretch.sign = signOf(plan, config);
	} else if (run === d.s.run && d.s.boots[0]) {
		followMarks(d, run, d.s.boots[0], onBobbinNow(d, run), now);
	}
	return { state: d.s, facts: d.facts };
}

/** A winder without a coil turns while this bench's coil waits: which of the two winds it? null when it does not wait. */
export function askWhichWinder(
	state: WinderState,
	config: WinderConfig,
	other: { winderId: string; name: string; turns: number },
	now: number
): { state: WinderState; facts: Fact[] } | null {
	const d = draft(state, config, now);
	const run = d.s.run;
	if (!run || run.status !== 'open' || run.startedAt !== null || run.question !== null) return null;
	ask(run, { kind: 'which-winder', otherWinderId: other.winderId, otherName: other.name, turns: other.turns });
	say(d, 'which-winder', now, { detail: { other: other.name } });
	return { state: d.s, facts: d.facts };
}
