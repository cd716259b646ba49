import { settle, act, undo } from './acts.ts';
import { deviceTimeAt } from './boot.ts';
import { linkStateOf } from './link.ts';
import { turnsOf } from './run.ts';
import { type WinderState, type TapAnswer, type Draft, draft, say, onBobbinNow } from './state.ts';
import type { Fact, Tap, TapRefusal, WinderConfig } from './types.ts';

/** Taps on the bench: which have a meaning now, and where on the device's time they fall. */

/** Taps remembered by id: more than a maker makes while one is on its way. */
const tapsDoneMax = 32;

/** Taps that are instants of the device: their figures are those of the last line up to them. */
const placed: ReadonlySet<Tap['kind']> = new Set([
	'start',
	'start-here',
	'keep',
	'set-aside',
	'snapped',
	'taking-off',
	'taking-off-done'
]);

/**
 * A tap on the bench.
 *
 * @param madeAt wall ms at which the screen was touched
 * @param now wall ms of now; the difference is what the tap waited on its way
 */
export function takeTap(
	state: WinderState,
	config: WinderConfig,
	tap: Tap,
	madeAt: number,
	now: number = madeAt
): { state: WinderState; facts: Fact[]; answer: TapAnswer } {
	const d = draft(state, config, now);
	const known = d.s.tapsDone.find(([id]) => id === tap.id);
	if (known) return { state, facts: [], answer: known[1] };

	const refusal = whyNot(d, tap);
	if (refusal) return { state, facts: [], answer: { ok: false, why: refusal } };

	const run = d.s.run!;
	const boot = d.s.boots[0];
	let pending = false;
	if (placed.has(tap.kind) && boot) {
		const t = deviceTimeAt(boot, madeAt, config.timeScale);
		run.pending = {
			tap,
			madeAt,
			b: boot.b,
			t,
			before: d.s.trail.findLast((point) => point.t <= t) ?? null,
			after: d.s.trail.find((point) => point.t >= t) ?? null,
			afterAt: null
		};
		if (run.pending.after) run.pending.afterAt = now;
		settle(d, run, boot.signedOffAt !== null);
		pending = run.pending !== null;
		if (pending) say(d, 'tap-waiting', madeAt, { detail: { tap: tap.kind }, memberId: tap.memberId });
	} else if (tap.kind === 'undo') undo(d, run, tap);
	else act(d, run, tap, madeAt, null);

	const answer: TapAnswer = { ok: true, pending };
	d.s.tapsDone = [...d.s.tapsDone, [tap.id, answer] as [string, TapAnswer]].slice(-tapsDoneMax);
	return { state: d.s, facts: d.facts, answer };
}

function whyNot(d: Draft, tap: Tap): TapRefusal | null {
	const run = d.s.run;
	if (!run) return 'no-run';
	const boot = d.s.boots[0];
	const onBobbin = onBobbinNow(d, run);
	const heard = boot && boot.signedOffAt === null ? linkStateOf(d.now - boot.lastAt, boot.turning) : 'no-signal';
	// Turning counts only while it is seen: with the link down a maker may tap at a spindle that stands.
	const turning = boot !== undefined && boot.turning && heard !== 'no-signal';
	const begun = run.startedAt !== null;
	if (tap.kind === 'undo') {
		if (run.pending && run.status === 'open') return null;
		if (run.status === 'open') return 'not-now';
		const nextTurns = d.s.upNext !== null && turnsOf(d.s.upNext, d.s.boots) >= 1;
		return run.undoUntil === null || d.now > run.undoUntil || nextTurns ? 'too-late' : null;
	}
	if (run.status !== 'open' || run.pending) return 'not-now';
	switch (tap.kind) {
		case 'start':
			return begun ? 'not-now' : null;
		case 'start-here':
			return begun && !run.settled ? null : 'not-now';
		case 'look':
			return run.look && !run.look.answered ? (turning ? 'turning' : null) : 'not-now';
		case 'keep':
			if (!begun || !boot) return 'not-now';
			if (run.question === 'snapped' || run.question === 'jump' || run.question === 'restarted') return 'not-now';
			return turning ? 'turning' : null;
		case 'set-aside':
			return begun ? (turning ? 'turning' : null) : 'not-now';
		case 'snapped':
			return begun && boot && !run.snapOpen ? null : 'not-now';
		case 'snap-at':
			if (run.question !== 'snapped' || !run.snapOpen) return 'not-now';
			return Number.isInteger(tap.turns) && tap.turns >= 0 && tap.turns <= turnsOf(run, d.s.boots) - run.emptyTurns
				? null
				: 'range';
		case 'no-snap':
			return run.question === 'snapped' ? null : 'not-now';
		case 'taking-off':
			return begun && boot && !run.takingOff ? (turning ? 'turning' : null) : 'not-now';
		case 'taking-off-done':
			return run.takingOff ? (turning ? 'turning' : null) : 'not-now';
		case 'jump-take':
		case 'jump-keep':
			return run.question === 'jump' ? null : 'not-now';
		case 'go-on':
			return run.question === 'restarted' ? null : 'not-now';
		case 'true-count':
			if (run.question !== 'restarted') return 'not-now';
			return Number.isInteger(tap.turns) && tap.turns >= 0 && tap.turns <= onBobbin + 100_000 ? null : 'range';
		case 'stopped':
		case 'not-stopped':
			return run.question === 'did-you-stop' ? null : 'not-now';
		case 'this-winder':
		case 'other-winder':
			return run.question === 'which-winder' ? null : 'not-now';
	}
}
