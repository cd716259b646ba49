import { tapWaitMs, settle } from './acts.ts';
import { linkStateOf } from './link.ts';
import { onBobbinOf, stateOf, turnsOf } from './run.ts';
import { type WinderState, draft, say, promote } from './state.ts';
import { takeTap } from './taps.ts';
import type { Fact, Tap, WinderConfig } from './types.ts';

/** What happens because time passes: undo runs out, a waiting tap grows old, a coil is kept by itself. */
export function passTime(state: WinderState, config: WinderConfig, now: number): { state: WinderState; facts: Fact[] } {
	const run = state.run;
	const boot = state.boots[0];
	const undoOver = run !== null && run.undoUntil !== null && now > run.undoUntil;
	const tapOld = run?.pending?.afterAt != null && now - run.pending.afterAt >= tapWaitMs;
	const upOver = state.catchingUp !== null && now - state.catchingUp.lastLateAt > 1_500;
	const keepDue = keepsItself(state, config, now);
	if (!undoOver && !tapOld && !upOver && !keepDue) return { state, facts: [] };

	const d = draft(state, config, now);
	if (upOver) {
		const since = d.s.catchingUp!.since;
		d.s.catchingUp = null;
		say(d, 'caught-up', now, { detail: { awayMs: Math.round((boot?.lastAt ?? now) - since) } });
	}
	if (tapOld) settle(d, d.s.run!, false);
	if (undoOver && d.s.run) {
		d.s.run.undoUntil = null;
		promote(d);
	}
	if (keepDue) {
		const tap: Tap = { kind: 'keep', id: run!.runId, memberId: null };
		const step = takeTap(d.s, config, tap, now);
		return { state: step.state, facts: [...d.facts, ...step.facts] };
	}
	return { state: d.s, facts: d.facts };
}

function keepsItself(state: WinderState, config: WinderConfig, now: number): boolean {
	const run = state.run;
	const boot = state.boots[0];
	if (config.keepAfterMs === null || !run || run.status !== 'open' || !boot || run.pending) return false;
	if (run.standingSince === null || run.question !== null || boot.turning) return false;
	// Once undone, the maker decides.
	if (state.tapsDone.some(([id]) => id === run.runId)) return false;
	const onBobbin = onBobbinOf(run, turnsOf(run, state.boots));
	if (stateOf(run, config, onBobbin, false) !== 'on-count') return false;
	if (linkStateOf(now - boot.lastAt, false) !== 'live') return false;
	const stoodAt = run.standingSince / config.timeScale;
	return now - stoodAt >= config.keepAfterMs;
}
