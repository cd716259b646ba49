import { copyBoot, type BootState, type Point } from './boot.ts';
import type { PulseWindow } from './plausible.ts';
import { copyRun, onBobbinOf, turnsOf, type RunCore } from './run.ts';
import type { Fact, FactKind, LiveView, Notice, QuestionDetail, TapRefusal, WinderConfig } from './types.ts';

/**
 * The state of one winder: plain data, never changed in place by the public functions, so it can be stored as JSON and
 * compared.
 */
export interface WinderState {
	v: 1;
	/** The boot the winder is in first, then those before it, bounded. */
	boots: BootState[];
	/** Recent moments of the current boot in order of time; events longer than ticks. */
	trail: Point[];
	run: RunCore | null;
	/** The coil after a kept one that can still be undone. */
	upNext: RunCore | null;
	last: LiveView['last'];
	/** When the last run of this winder ended: a session begins after a long rest. */
	lastEndedAt: number | null;
	/** Totals where the last run ended, the zero of the next one; and what moved since. */
	end: { b: string; f: number; v: number; at: number; moves: [number, 0 | 1][] } | null;
	/** Totals since which the winder has had no coil. */
	idle: { b: string; f: number; v: number } | null;
	/** The last plan told to the device. */
	set: { id: number; content: string; b: string; answered: boolean; sentAt: number } | null;
	commandId: number;
	askedAt: number;
	notices: [Notice, number][];
	/** Start of the stretch over which the two clocks are compared. */
	clock: { t: number; at: number } | null;
	pulse: PulseWindow | null;
	bounce: { x: number; at: number } | null;
	/** Late lines are coming after a gap. */
	catchingUp: { since: number; lastLateAt: number } | null;
	/** Answers of the last taps by id, so that a repeated one does nothing. */
	tapsDone: [string, TapAnswer][];
}

export type TapAnswer = { ok: true; pending: boolean } | { ok: false; why: TapRefusal };

export function newWinder(): WinderState {
	return {
		v: 1,
		boots: [],
		trail: [],
		run: null,
		upNext: null,
		last: null,
		lastEndedAt: null,
		end: null,
		idle: null,
		set: null,
		commandId: 0,
		askedAt: 0,
		notices: [],
		clock: null,
		pulse: null,
		bounce: null,
		catchingUp: null,
		tapsDone: []
	};
}

/** Work in progress on a copy of the state. */
export interface Draft {
	s: WinderState;
	facts: Fact[];
	config: WinderConfig;
	/** Wall ms of now. */
	now: number;
}

const noticeMs = 30_000;

/**
 * A copy to work on.
 *
 * @param b the boot a line speaks of: only that one and the current one are copied, since lines come by the thousand
 */
export function draft(state: WinderState, config: WinderConfig, now: number, b?: string): Draft {
	const s: WinderState = {
		...state,
		boots: state.boots.map((boot, i) => (b === undefined || i === 0 || boot.b === b ? copyBoot(boot) : boot)),
		trail: state.trail.slice(),
		run: state.run && copyRun(state.run),
		upNext: state.upNext && copyRun(state.upNext),
		notices: state.notices.filter(([, until]) => until > now)
	};
	return { s, facts: [], config, now };
}

export function say(d: Draft, kind: FactKind, at: number, more: Partial<Omit<Fact, 'kind' | 'at'>> = {}): void {
	const run = d.s.run;
	d.facts.push({
		kind,
		at: Math.round(at),
		runId: run?.runId ?? null,
		turns: run && run.startedAt !== null ? onBobbinNow(d, run) : null,
		detail: {},
		memberId: null,
		...more
	});
}

/** A fault belongs to the record of the run it happened in. */
export function sayFault(d: Draft, kind: FactKind, at: number, detail: Fact['detail'] = {}): void {
	const run = d.s.run;
	if (run && run.status === 'open' && !run.faults.includes(kind)) run.faults.push(kind);
	say(d, kind, at, { detail });
}

export function notice(d: Draft, kind: Notice): boolean {
	const fresh = !d.s.notices.some(([known]) => known === kind);
	d.s.notices = d.s.notices.filter(([known]) => known !== kind);
	d.s.notices.push([kind, d.now + noticeMs]);
	return fresh;
}

export const onBobbinNow = (d: Draft, run: RunCore): number => onBobbinOf(run, turnsOf(run, d.s.boots));

export function ask(run: RunCore, detail: QuestionDetail): void {
	run.question = detail.kind;
	run.questionDetail = detail;
}

export function clearQuestion(run: RunCore): void {
	run.question = null;
	run.questionDetail = null;
}

/** The coil up next becomes the run; the one before it can be undone no more. */
export function promote(d: Draft): void {
	const { s } = d;
	rememberLast(s);
	s.run = s.upNext;
	s.upNext = null;
	s.end = null;
}

export function rememberLast(s: WinderState): void {
	const run = s.run;
	if (!run || run.status === 'open') return;
	s.last = {
		runId: run.runId,
		name: run.plan.name,
		state: run.status,
		onBobbin: onBobbinOf(run, turnsOf(run, s.boots)),
		sticker: run.sticker,
		direction: run.plan.direction,
		startedAt: run.startedAt,
		endedAt: run.endedAt
	};
}
