import type { BootState } from './boot.ts';
import { lookAfter, lookPassedAfterTurns, rearmTurns } from './cues.ts';
import { cuePlanOf, cuesOf, type RunCore } from './run.ts';
import { type Draft, say } from './state.ts';

/** Looks and marks: which have come, which were stood for, which were passed. */

export function followLooks(
	d: Draft,
	run: RunCore,
	boot: BootState,
	onBobbin: number,
	at: number,
	gapMs: number
): void {
	const { config } = d;
	const plan = () => cuePlanOf(run, config);

	if (run.look && boot.turning && onBobbin > run.look.turns) {
		if (!run.look.answered) finishLook(d, run, null, at);
		run.look = null;
	}
	// Fallen well below a look that was dealt with: it comes again.
	if (run.lookDone > 0 && onBobbin < run.lookDone - rearmTurns) {
		let done = 0;
		for (let next = lookAfter({ ...plan(), lookDone: 0 }, 0); next !== null && next <= onBobbin;) {
			done = next;
			next = lookAfter(plan(), next);
		}
		run.lookDone = done;
		run.look = null;
		run.lookDue = null;
	}

	for (;;) {
		const next = lookAfter(plan(), run.lookDone);
		if (next === null || onBobbin <= next + lookPassedAfterTurns) break;
		if (gapMs > 2_000 * config.timeScale) run.lookUnseen.push(next);
		else say(d, 'look-passed', at, { detail: { mark: next } });
		run.lookDone = next;
		run.lookDue = null;
		run.look = null;
	}

	const cues = cuesOf(run, config, onBobbin, boot.turning);
	if (cues.cue === 'look' && cues.nextLook !== null && run.lookDue !== cues.nextLook) {
		run.lookDue = cues.nextLook;
		say(d, 'look-due', at, { detail: { mark: cues.nextLook } });
	} else if (cues.cue !== 'look' && !run.look) run.lookDue = null;
	if (!boot.turning && run.lookDue !== null && run.lookDue > run.lookDone && !run.look) {
		run.look = { mark: run.lookDue, turns: onBobbin, answered: false };
	}
}

export function finishLook(
	d: Draft,
	run: RunCore,
	note: RunCore['looks'][number]['note'],
	at: number,
	memberId: string | null = null
): void {
	const look = run.look!;
	run.looks.push({ mark: look.mark, turns: look.turns, note });
	run.lookDone = Math.max(run.lookDone, look.mark);
	run.lookDue = null;
	say(d, 'look-seen', at, { turns: look.turns, detail: { mark: look.mark, note }, memberId });
}

export function followMarks(d: Draft, run: RunCore, boot: BootState, onBobbin: number, at: number): void {
	const cues = cuesOf(run, d.config, onBobbin, boot.turning);
	const said = run.said;
	if (onBobbin < cues.easeAt - rearmTurns) said.ease = false;
	if (onBobbin < cues.stopAt - rearmTurns) {
		said.stop = false;
		said.onCount = false;
	}
	if (cues.left > rearmTurns) said.over = false;

	if (onBobbin >= cues.easeAt && !said.ease) {
		said.ease = true;
		say(d, 'eased', at);
	}
	if (onBobbin >= cues.stopAt && !said.stop) {
		said.stop = true;
		say(d, 'stop-cue', at);
	}
	if (cues.left < 0 && !said.over) {
		said.over = true;
		say(d, 'over', at, { detail: { over: -cues.left } });
	}
	if (!boot.turning && Math.abs(cues.left) <= run.plan.toleranceTurns && !said.onCount) {
		said.onCount = true;
		say(d, 'on-count', at, { detail: { left: cues.left } });
	}
}
