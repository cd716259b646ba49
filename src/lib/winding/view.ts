import { axisAt, net } from './boot.ts';
import { linkStateOf } from './link.ts';
import { cuesOf, figuresOf as figuresOfRun, stateOf, type RunCore } from './run.ts';
import type { WinderState } from './state.ts';
import type { LiveView, Notice, RunFigures, RunView, WinderConfig } from './types.ts';

/** Reading the state: for a screen, for the record. */

/** What a screen is told, without what only the server knows. */
export type WinderView = Omit<
	LiveView,
	'seq' | 'server' | 'winderId' | 'winderName' | 'unsaved' | 'saving' | 'next' | 'waiting'
>;

export function viewOf(state: WinderState, config: WinderConfig, now: number): WinderView {
	const boot = state.boots[0] ?? null;
	const ageMs = boot ? Math.max(0, now - boot.lastAt) : null;
	const turning = boot?.turning ?? false;
	const standing: Notice[] = state.notices.filter(([, until]) => until > now).map(([kind]) => kind);
	if (state.catchingUp) standing.push('catching-up');
	if (boot?.signedOffAt != null) standing.push('signed-off');
	return {
		at: now,
		seesDirection: config.seesDirection,
		boot: boot?.b ?? null,
		forward: boot?.f ?? 0,
		reverse: boot?.v ?? 0,
		net: boot ? net(boot) : 0,
		rpm: boot && turning ? boot.r : 0,
		turning,
		ageMs,
		link: boot?.signedOffAt != null ? 'no-signal' : linkStateOf(ageMs, turning),
		notices: standing,
		run: state.run && runView(state, config, state.run, turning),
		last: state.last,
		timeScale: config.timeScale
	};
}

function runView(state: WinderState, config: WinderConfig, run: RunCore, turning: boolean): RunView {
	const figures = readFigures(state, config, run);
	const cues = cuesOf(run, config, figures.onBobbin, turning);
	const ending = run.pending !== null && (run.pending.tap.kind === 'keep' || run.pending.tap.kind === 'set-aside');
	const quiet = run.status !== 'open' || run.startedAt === null || run.takingOff || ending || run.snapOpen !== null;
	// A look that has been answered is over, though the spindle still stands on its mark.
	const cue = quiet || (cues.cue === 'look' && run.look?.answered) ? null : cues.cue;
	return {
		...figures,
		runId: run.runId,
		coil: run.plan,
		target: run.plan.target,
		left: cues.left,
		state: stateOf(run, config, figures.onBobbin, turning),
		question: run.question,
		questionDetail: run.questionDetail,
		cue,
		nextLook: cues.nextLook,
		easeAt: cues.easeAt,
		stopAt: cues.stopAt,
		firstLook: run.firstLook,
		movedTurnsAgo: run.startedAt !== null && !run.settled && run.status === 'open' ? figures.onBobbin : null,
		pendingTap: run.pending?.tap.kind ?? null,
		startedAt: run.startedAt,
		undoUntil: run.undoUntil,
		sticker: run.sticker,
		setAsideReason: run.setAsideReason
	};
}

function readFigures(state: WinderState, config: WinderConfig, run: RunCore): RunFigures {
	const boot = state.boots[0];
	const nowAxis = boot ? axisAt(boot, boot.t, config.timeScale) : 0;
	return figuresOfRun(run, state.boots, nowAxis, !config.seesDirection);
}

/** The figures of the run, or of the one up next; null when neither has that id. */
export function figuresOf(state: WinderState, config: WinderConfig, runId: string): RunFigures | null {
	const run = [state.run, state.upNext].find((known) => known?.runId === runId);
	return run ? readFigures(state, config, run) : null;
}

/** Runs this state holds: the one on the bench and the one up next. */
export const runIdsOf = (state: WinderState): string[] =>
	[state.run, state.upNext].flatMap((run) => (run ? [run.runId] : []));

/** Turns made since the winder has had no coil; 0 while it has one. */
export function idleTurns(state: WinderState): number {
	const boot = state.boots[0];
	if (state.run || !boot || !state.idle || state.idle.b !== boot.b) return 0;
	return boot.f + boot.v - state.idle.f - state.idle.v;
}
