import { axisAt, net, type BootState, type Point } from './boot.ts';
import { finishLook } from './looks.ts';
import { addMove, newStretch, onBobbinOf, signOf, turnsOf, type PendingTap, type RunCore } from './run.ts';
import { type Draft, say, sayFault, onBobbinNow, ask, clearQuestion, rememberLast } from './state.ts';
import type { Tap } from './types.ts';

/** What a tap does once its place among the lines is known. */

/** How long a keep can be undone. */
export const undoMs = 10_000;
/** A tap whose surroundings never come whole is placed at the last line before it. */
export const tapWaitMs = 10_000;
/** Two moments this close around a tap place it well enough. */
const tapBracketMs = 1_500;

/** A moment of the boot a tap waits for came in: it narrows the tap's place. */
export function waitingTaps(d: Draft, boot: BootState, point: Point, receivedAt: number): void {
	for (const run of [d.s.run, d.s.upNext]) {
		const pending = run?.pending;
		if (!run || !pending || pending.b !== boot.b) continue;
		if (point.t <= pending.t && (!pending.before || point.t >= pending.before.t)) pending.before = point;
		if (point.t >= pending.t && (!pending.after || point.t < pending.after.t)) pending.after = point;
		if (pending.after) pending.afterAt ??= receivedAt;
		settle(d, run, false);
	}
}

/** Acts on a waiting tap once the lines have reached it; `anyway` when no more will come. */
export function settle(d: Draft, run: RunCore, anyway: boolean): void {
	const pending = run.pending;
	if (!pending) return;
	const boot = d.s.boots.find((known) => known.b === pending.b);
	if (!boot) return;
	const { before, after } = pending;
	if (!anyway) {
		if (!after) return;
		const whole = boot.e >= after.e;
		const still = before !== null && before.f === after.f && before.v === after.v;
		const stood = before?.k === 'stop';
		const close = before !== null && after.t - before.t <= tapBracketMs * d.config.timeScale;
		const waited = pending.afterAt !== null && d.now - pending.afterAt >= tapWaitMs;
		if (!(whole && (still || stood || close)) && !waited) return;
	}
	run.pending = null;
	act(
		d,
		run,
		pending.tap,
		pending.madeAt,
		before ?? after ?? { t: pending.t, f: boot.f, v: boot.v, r: 0, k: null, e: boot.e },
		pending
	);
}

/** What a tap does, at the totals of its moment. */
export function act(d: Draft, run: RunCore, tap: Tap, madeAt: number, point: Point | null, pending?: PendingTap): void {
	const { s, config } = d;
	const boot = s.boots.find((known) => known.b === pending?.b) ?? s.boots[0];
	const by = { memberId: tap.memberId };
	const reads = boot && point ? { b: boot.b, f: point.f, v: point.v } : undefined;
	const turnsThen = turnsOf(run, s.boots, reads);
	const onBobbinThen = onBobbinOf(run, turnsThen);

	switch (tap.kind) {
		case 'start':
		case 'start-here': {
			run.settled = true;
			run.startedAt = madeAt;
			if (boot && point && pending) {
				run.stretches = [newStretch(boot, signOf(run.plan, config), point, config.timeScale)];
				run.adjust = 0;
				run.startAxis = axisAt(boot, pending.t, config.timeScale);
				run.moves = run.moves.filter(([axis]) => axis > run.startAxis!);
				run.movesFoldedMs = 0;
				if (boot.turning && boot === s.boots[0] && run.moves.length === 0) addMove(run, run.startAxis, 1);
				if (!boot.turning) run.standingSince = run.startAxis;
			}
			run.looks = [];
			run.lookUnseen = [];
			run.lookDone = 0;
			run.lookDue = null;
			run.look = null;
			run.takenBackSaid = 0;
			run.rpmTop = boot ? Math.abs(boot.r) : 0;
			say(d, tap.kind === 'start' ? 'started' : 'started-here', madeAt, { turns: 0, ...by });
			return;
		}
		case 'look':
			finishLook(d, run, tap.note, madeAt, tap.memberId);
			run.look = { ...run.look!, answered: true };
			return;
		case 'keep':
		case 'set-aside':
			end(d, run, tap, madeAt, boot, point, pending);
			return;
		case 'snapped': {
			// Seen and said within about a second: the wire left that much earlier. Common practice, no source.
			const reactionTurns = point ? Math.round(Math.abs(point.r) / 60) : 0;
			const guess = Math.max(0, onBobbinThen - reactionTurns);
			run.snapOpen = { saidAt: turnsThen, leftAt: guess, answered: false };
			ask(run, { kind: 'snapped', guess, counted: turnsThen });
			sayFault(d, 'snapped', madeAt, { counted: turnsThen, guess });
			d.facts[d.facts.length - 1]!.memberId = tap.memberId;
			return;
		}
		case 'snap-at':
			run.snapOpen = { ...run.snapOpen!, leftAt: tap.turns, answered: true };
			clearQuestion(run);
			say(d, 'snap-placed', madeAt, { turns: tap.turns, detail: { leftAt: tap.turns }, ...by });
			if (!boot?.turning) closeSnap(d, run);
			return;
		case 'no-snap':
			run.snapOpen = null;
			clearQuestion(run);
			say(d, 'no-snap', madeAt, by);
			return;
		case 'taking-off':
		case 'taking-off-done': {
			const off = tap.kind === 'taking-off';
			run.takingOff = off;
			// One sensor counts everything up: from here the wire comes off and its count is subtracted.
			if (!config.seesDirection && boot && point) turnStretch(run, boot, point, off ? -1 : 1, config.timeScale);
			say(d, tap.kind, madeAt, { turns: onBobbinThen, ...by });
			return;
		}
		case 'jump-take':
		case 'jump-keep': {
			const held = boot?.held;
			if (boot && held) {
				const jump = net({ f: held.firstF, v: held.firstV }) - net({ f: held.fromF, v: held.fromV });
				boot.f = Math.max(boot.f, held.f);
				boot.v = Math.max(boot.v, held.v);
				boot.held = null;
				if (tap.kind === 'jump-keep') run.adjust -= signOf(run.plan, config) * jump;
			}
			clearQuestion(run);
			say(d, tap.kind === 'jump-take' ? 'jump-taken' : 'jump-kept', madeAt, by);
			return;
		}
		case 'go-on':
			clearQuestion(run);
			say(d, 'restart-answered', madeAt, { detail: { answer: 'go-on' }, ...by });
			return;
		case 'true-count': {
			const was = onBobbinNow(d, run);
			run.adjust += tap.turns - was;
			clearQuestion(run);
			say(d, 'restart-answered', madeAt, { detail: { answer: 'true-count', was, turns: tap.turns }, ...by });
			return;
		}
		case 'stopped':
		case 'not-stopped':
			clearQuestion(run);
			say(d, tap.kind === 'stopped' ? 'said-stopped' : 'said-not-stopped', madeAt, by);
			return;
		case 'this-winder':
		case 'other-winder':
			say(d, 'which-winder', madeAt, { detail: { answer: tap.kind }, ...by });
			clearQuestion(run);
			if (tap.kind === 'other-winder') s.run = null;
			return;
		case 'undo':
			return;
	}
}

/** From this moment the count of the boot goes the other way. */
function turnStretch(run: RunCore, boot: BootState, point: Point, sign: 1 | -1, timeScale: number): void {
	for (const stretch of run.stretches) {
		if (stretch.b !== boot.b || stretch.toF !== null) continue;
		stretch.toF = point.f;
		stretch.toV = point.v;
	}
	run.stretches.push(newStretch(boot, sign, point, timeScale));
}

/** The spindle stands and the maker has said where the wire left: what turned since carried none. */
export function closeSnap(d: Draft, run: RunCore): void {
	const snap = run.snapOpen!;
	const turns = turnsOf(run, d.s.boots);
	const emptyTurns = Math.max(0, turns - run.emptyTurns - snap.leftAt);
	run.snaps.push({ saidAt: snap.saidAt, leftAt: snap.leftAt, emptyTurns });
	run.emptyTurns += emptyTurns;
	run.snapOpen = null;
}

/** Kept or set aside, at the totals of the tap. What turned since belongs to the next coil. */
export function end(
	d: Draft,
	run: RunCore,
	tap: Tap & { kind: 'keep' | 'set-aside' },
	madeAt: number,
	boot: BootState | undefined,
	point: Point | null,
	pending: PendingTap | undefined
): void {
	const { s, config } = d;
	if (run.snapOpen?.answered) closeSnap(d, run);
	for (const stretch of run.stretches) {
		if (stretch.toF !== null) continue;
		const known = s.boots.find((candidate) => candidate.b === stretch.b);
		const here = boot && point && stretch.b === boot.b;
		stretch.toF = here ? point.f : (known?.f ?? stretch.fromF);
		stretch.toV = here ? point.v : (known?.v ?? stretch.fromV);
	}
	run.endAxis = boot ? axisAt(boot, pending?.t ?? boot.t, config.timeScale) : null;
	run.endedAt = madeAt;
	run.endedBy = tap.memberId;
	run.status = tap.kind === 'keep' ? 'kept' : 'set-aside';
	run.setAsideReason = tap.kind === 'set-aside' ? tap.reason : null;
	run.undoUntil = d.now + undoMs;
	for (const mark of run.lookUnseen) say(d, 'look-passed', madeAt, { detail: { mark } });
	run.lookUnseen = [];
	s.lastEndedAt = madeAt;
	if (boot && point) {
		const moves = run.endAxis === null ? [] : run.moves.filter(([axis]) => axis > run.endAxis!);
		s.end = { b: boot.b, f: point.f, v: point.v, at: d.now, moves };
		if (s.upNext) {
			s.upNext.stretches = [newStretch(boot, signOf(s.upNext.plan, config), point, config.timeScale)];
			s.upNext.moves = moves.slice();
		}
	}
	say(d, tap.kind === 'keep' ? 'kept' : 'set-aside', madeAt, {
		turns: onBobbinNow(d, run),
		detail: tap.kind === 'keep' ? {} : { reason: tap.reason },
		memberId: tap.memberId
	});
	rememberLast(s);
}

export function undo(d: Draft, run: RunCore, tap: Tap): void {
	if (run.status === 'open') {
		say(d, 'undone', d.now, { detail: { tap: run.pending!.tap.kind }, memberId: tap.memberId });
		run.pending = null;
		return;
	}
	const ended = run.status;
	run.status = 'open';
	run.endedAt = null;
	run.endedBy = null;
	run.endAxis = null;
	run.undoUntil = null;
	run.setAsideReason = null;
	const current = d.s.boots[0];
	const lastStretch = run.stretches[run.stretches.length - 1];
	if (current && lastStretch && lastStretch.b === current.b) {
		lastStretch.toF = null;
		lastStretch.toV = null;
	}
	d.s.end = null;
	d.s.last = null;
	say(d, 'undone', d.now, { detail: { was: ended }, memberId: tap.memberId });
}
