import type { DeviceLine, Event, Hi, HostLine, SetPlan, Tick } from '../turnline/types.ts';
import {
	addEvent,
	addLine,
	axisAt,
	copyBoot,
	deviceTimeAt,
	hasEvent,
	hasEventGap,
	hasLine,
	learnOffset,
	loseEvents,
	net,
	newBoot,
	sumOf,
	unwrapT,
	wallAt,
	type BootState,
	type Point
} from './boot.ts';
import { lookAfter, lookPassedAfterTurns, rearmTurns } from './cues.ts';
import { linkStateOf } from './link.ts';
import {
	endedAtSpeed,
	pulsesOff,
	pulseSpeedsMin,
	pulseWindowMs,
	turnsPossible,
	type PulseWindow
} from './plausible.ts';
import {
	addMove,
	copyRun,
	cuePlanOf,
	cuesOf,
	figuresOf as figuresOfRun,
	newRun,
	onBobbinOf,
	signOf,
	stateOf,
	takenBackOf,
	turnsOf,
	type PendingTap,
	type RunCore
} from './run.ts';
import type {
	CoilPlan,
	Fact,
	FactKind,
	LiveView,
	Notice,
	QuestionDetail,
	RunFigures,
	RunView,
	Tap,
	TapRefusal,
	WinderConfig
} from './types.ts';

/**
 * The whole fold of one winder: lines, taps, coils and the passing of time go in, the state and its facts come out. No
 * clock, no input or output: every time is an argument. The state is plain data and is never changed in place, so it can
 * be stored as JSON and compared.
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

/** A line as it is kept: `t` is unwrapped device milliseconds. */
export interface KeptLine {
	b: string;
	n: number;
	e: number;
	k: string | null;
	f: number;
	v: number;
	r: number | null;
	t: number;
	x: number | null;
	g: number | null;
}

export interface LineStep {
	state: WinderState;
	facts: Fact[];
	/** `thinned`: taken in but not kept as a line of its own. */
	outcome: 'stored' | 'thinned' | 'duplicate';
	keep: KeptLine | null;
	/** The same number came with another content; the first stays. */
	mismatch: boolean;
}

const bootsMax = 4;
const trailTickMs = 4_000;
const trailMax = 160;
const trailEventsMs = 1_800_000;
/** A rest longer than this begins a new session, and with it an early look. */
const sessionRestMs = 4 * 3_600_000;
/** The first look of a session. Common practice, no source. */
export const firstLookTurns = 100;
/** A coil that began by turning and has come this far is meant: the question whether to start here goes away. */
const settledTurns = 200;
/** How long a keep can be undone. */
export const undoMs = 10_000;
/** A tap whose surroundings never come whole is placed at the last line before it. */
const tapWaitMs = 10_000;
/** Two moments this close around a tap place it well enough. */
const tapBracketMs = 1_500;
const noticeMs = 30_000;
const keepTickMs = 1_000;
const keepTickTurns = 10;
const tapsDoneMax = 32;
const syncAgainMs = 5_000;
const syncMax = 5;
const setAgainMs = 1_000;
const askAgainMs = 1_000;
/** "Beyond 5 s no bound": what a spindle did meanwhile is anybody's guess. */
const restartBoundMs = 5_000;

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
interface Draft {
	s: WinderState;
	facts: Fact[];
	config: WinderConfig;
	/** Wall ms of now. */
	now: number;
}

function draft(state: WinderState, config: WinderConfig, now: number): Draft {
	const s: WinderState = {
		...state,
		boots: state.boots.map(copyBoot),
		trail: state.trail.slice(),
		run: state.run && copyRun(state.run),
		upNext: state.upNext && copyRun(state.upNext),
		notices: state.notices.filter(([, until]) => until > now),
		tapsDone: state.tapsDone.slice()
	};
	return { s, facts: [], config, now };
}

function say(d: Draft, kind: FactKind, at: number, more: Partial<Omit<Fact, 'kind' | 'at'>> = {}): void {
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
function sayFault(d: Draft, kind: FactKind, at: number, detail: Fact['detail'] = {}): void {
	const run = d.s.run;
	if (run && run.status === 'open' && !run.faults.includes(kind)) run.faults.push(kind);
	say(d, kind, at, { detail });
}

function notice(d: Draft, kind: Notice): boolean {
	const fresh = !d.s.notices.some(([known]) => known === kind);
	d.s.notices = d.s.notices.filter(([known]) => known !== kind);
	d.s.notices.push([kind, d.now + noticeMs]);
	return fresh;
}

const onBobbinNow = (d: Draft, run: RunCore): number => onBobbinOf(run, turnsOf(run, d.s.boots));

/* ---- lines ---- */

/**
 * One line of the device.
 *
 * @param receivedAt wall ms at which it came in
 */
export function takeLine(state: WinderState, config: WinderConfig, line: DeviceLine, receivedAt: number): LineStep {
	const d = draft(state, config, receivedAt);
	const done = (outcome: LineStep['outcome'], keep: KeptLine | null = null, mismatch = false): LineStep => ({
		state: d.s,
		facts: d.facts,
		outcome,
		keep,
		mismatch
	});

	if (line.verb === 'OK' || line.verb === 'NO') {
		takeAnswer(d, line.b, line.verb === 'OK', line.id, line.why);
		return done('thinned');
	}
	if (line.verb === 'BYE') return done('thinned');

	let boot = d.s.boots.find((known) => known.b === line.b);
	const fresh = !boot;
	if (!boot) {
		boot = newBoot(line.b, line.t, receivedAt, config.timeScale);
		enterBoot(d, boot, line);
	}
	const t = unwrapT(boot, line.t);
	const point: Point = {
		t,
		f: line.f,
		v: line.v,
		r: line.r ?? (line.verb === 'HI' ? boot.r : line.verb === 'E' && line.k === 'stop' ? 0 : boot.r),
		k: line.verb === 'E' ? line.k : null,
		e: line.e
	};

	if (line.verb === 'HI') {
		if (!fresh) maybeBridge(d, boot, line);
		boot.eTop = Math.max(boot.eTop, line.e);
		advance(d, boot, point, line, receivedAt);
		return done('stored');
	}

	const sum = sumOf(point);
	// Events by their own number alone: the memory of line numbers is bounded, and an event must never fall to it.
	if (line.verb === 'E' ? hasEvent(boot, line.e) : hasLine(boot, line.n)) {
		const first = boot.recent.find(([n]) => n === line.n);
		const mismatch = first !== undefined && first[1] !== sum;
		if (mismatch) sayFault(d, 'line-mismatch', receivedAt, { n: line.n });
		return done('duplicate', null, mismatch);
	}
	addLine(boot, line.n, sum);
	boot.eTop = Math.max(boot.eTop, line.e);
	if (line.verb === 'E') {
		addEvent(boot, line.e);
		if (line.k === 'bufov') sayFault(d, 'buffer-overflow', wallAt(boot, t, config.timeScale));
	}

	const late = t < boot.t;
	const keepIt = line.verb === 'E' || late || worthKeeping(boot, point);
	advance(d, boot, point, line, receivedAt);
	if (!keepIt) return done('thinned');
	if (!late) {
		boot.keptT = t;
		boot.keptTurns = point.f + point.v;
		boot.keepNext = line.verb === 'E';
	}
	return done('stored', {
		b: line.b,
		n: line.n,
		e: line.e,
		k: line.verb === 'E' ? line.k : null,
		f: line.f,
		v: line.v,
		r: line.r ?? null,
		t,
		x: line.x ?? null,
		g: line.g ?? null
	});
}

function worthKeeping(boot: BootState, point: Point): boolean {
	return boot.keepNext || point.t - boot.keptT >= keepTickMs || point.f + point.v - boot.keptTurns >= keepTickTurns;
}

function takeAnswer(d: Draft, b: string, ok: boolean, id: number | undefined, why: string | undefined): void {
	const boot = d.s.boots.find((known) => known.b === b);
	if (boot && !ok && why === 'gone') {
		const lost = loseEvents(boot);
		if (lost > 0) sayFault(d, 'event-lost', d.now, { events: lost });
	}
	if (d.s.set && id !== undefined && d.s.set.id === id && d.s.set.b === b) d.s.set = { ...d.s.set, answered: true };
}

/** A boot not heard of before becomes the current one. */
function enterBoot(d: Draft, boot: BootState, line: Hi | Tick | Event): void {
	const before = d.s.boots[0] ?? null;
	const bornAt = boot.birthAt;
	d.s.boots.unshift(boot);
	if (line.verb === 'HI') maybeBridge(d, boot, line);
	d.s.trail = [];
	d.s.clock = null;
	d.s.pulse = null;
	d.s.bounce = null;
	if (before) {
		// No more lines of the old boot can reach a tap that waits for them, but for a spool: what is known stands.
		for (const run of [d.s.run, d.s.upNext]) {
			if (run?.pending && run.pending.b === before.b) settle(d, run, true);
		}
	}
	for (const run of [d.s.run, d.s.upNext]) {
		if (!run || run.status !== 'open') continue;
		const fromZero = before !== null || bornAt > run.takenAt;
		if (run.startedAt === null) run.stretches = [];
		run.stretches.push({
			b: boot.b,
			sign: run.takingOff && !d.config.seesDirection ? -1 : signOf(run.plan, d.config),
			fromF: fromZero ? 0 : line.f,
			fromV: fromZero ? 0 : line.v,
			toF: null,
			toV: null
		});
	}
	const run = d.s.run;
	if (before && run && run.status === 'open' && run.startedAt !== null && !boot.bridged) {
		const gapMs = Math.max(0, bornAt - before.lastAt) * d.config.timeScale;
		const uncertain = gapMs <= restartBoundMs ? Math.ceil((Math.abs(before.r) / 60_000) * gapMs) : null;
		const at = onBobbinNow(d, run);
		ask(run, { kind: 'restarted', at, uncertainTurns: uncertain });
		sayFault(d, 'restarted', bornAt, { at, uncertain });
	}
	while (d.s.boots.length > bootsMax) forgetBoot(d, d.s.boots[d.s.boots.length - 1]!);
}

/** Before a boot is let go, what was counted in it is written into the runs. */
function forgetBoot(d: Draft, boot: BootState): void {
	for (const run of [d.s.run, d.s.upNext]) {
		for (const stretch of run?.stretches ?? []) {
			if (stretch.b === boot.b && stretch.toF === null) {
				stretch.toF = boot.f;
				stretch.toV = boot.v;
			}
		}
	}
	d.s.boots = d.s.boots.filter((known) => known !== boot);
}

/** Totals continued through a reset: the boot named takes them over, and boots between are part of them. */
function maybeBridge(d: Draft, boot: BootState, line: Hi): void {
	if (boot.bridged || line.pb === undefined || line.pf === undefined || line.pv === undefined) return;
	const index = d.s.boots.findIndex((known) => known.b === line.pb);
	const earlier = d.s.boots[index];
	if (index < 1 || !earlier || line.pf < earlier.f || line.pv < earlier.v) return;
	boot.bridged = true;
	// What is retained is known exactly: it is not a jump, however far it is.
	earlier.f = line.pf;
	earlier.v = line.pv;
	const between = d.s.boots.slice(d.s.boots.indexOf(boot) + 1, index).map((known) => known.b);
	for (const run of [d.s.run, d.s.upNext]) {
		if (!run) continue;
		run.stretches = run.stretches.filter((stretch) => !between.includes(stretch.b));
		if (run.question === 'restarted') clearQuestion(run);
	}
	if (d.s.run?.status === 'open' && d.s.run.startedAt !== null) {
		sayFault(d, 'bridged', boot.birthAt, { from: earlier.b });
	}
}

/** Two boards of one name: lines of an older boot go on in step with the wall clock after another took over. */
function watchForTwins(d: Draft, boot: BootState, t: number, receivedAt: number): void {
	const current = d.s.boots[0]!;
	// One board cannot have made this line after its next boot was born; a spool replays only what was made before.
	const madeAfter = boot.birthAt + t / d.config.timeScale > current.birthAt + 500;
	const otherLives = receivedAt - current.lastAt < 3_000;
	if (boot.alive < 0 || t <= boot.t || !madeAfter || !otherLives) return;
	boot.alive += 1;
	if (boot.alive < 2) return;
	// The one that was here first keeps the run; the other is heard but not counted.
	d.s.boots = [boot, ...d.s.boots.filter((known) => known !== boot)];
	boot.alive = 0;
	current.alive = -1;
	d.s.trail = [];
	for (const run of [d.s.run, d.s.upNext]) {
		if (!run) continue;
		run.stretches = run.stretches.filter((stretch) => stretch.b !== current.b);
		if (run.question === 'restarted') clearQuestion(run);
	}
	notice(d, 'two-winders');
	sayFault(d, 'two-winders', receivedAt, { kept: boot.b, other: current.b });
}

/** Brings a moment of a boot into totals, trail, taps and runs. */
function advance(d: Draft, boot: BootState, point: Point, line: Hi | Tick | Event, receivedAt: number): void {
	const { config, s } = d;
	if (boot !== s.boots[0]) {
		watchForTwins(d, boot, point.t, receivedAt);
		if (boot !== s.boots[0]) {
			// Lines of an earlier boot that come late: its totals still count in the runs they belong to.
			if (boot.alive >= 0) raise(d, boot, point, receivedAt);
			if (point.t > boot.t) {
				boot.t = point.t;
				boot.lastAt = receivedAt;
			}
			if (boot.alive < 0) notice(d, 'two-winders');
			moveSeen(d, boot, point);
			waitingTaps(d, boot, point, receivedAt);
			return;
		}
	}

	const first = boot.t < 0;
	const late = point.t < boot.t;
	const gapMs = receivedAt - boot.lastAt;
	learnOffset(boot, point.t, receivedAt, config.timeScale);
	if (line.verb === 'HI' && !first && gapMs > 3_000) s.catchingUp = { since: boot.lastAt, lastLateAt: receivedAt };
	if (late && s.catchingUp) s.catchingUp = { ...s.catchingUp, lastLateAt: receivedAt };

	const deviceGapMs = first ? 0 : point.t - boot.t;
	const before = { turning: boot.turning, t: boot.t };
	if (!s.run && s.idle?.b !== boot.b) s.idle = { b: boot.b, f: first ? point.f : boot.f, v: first ? point.v : boot.v };
	const counts = raise(d, boot, point, receivedAt);
	keepTrail(s, point);

	if (!late) {
		boot.t = point.t;
		boot.lastAt = receivedAt;
		boot.r = point.r;
		if (point.k === 'go') boot.turning = true;
		else if (point.k === 'stop') boot.turning = false;
		else if (line.r !== undefined) boot.turning = line.r !== 0;
		else if (first) boot.turning = false;
		checkSensor(d, boot, line, receivedAt);
		if (!first && line.verb === 'T') checkClock(d, boot, point.t, receivedAt, gapMs);
		checkPulses(d, boot, point);
	}
	if (counts) {
		if (late) moveSeen(d, boot, point);
		else follow(d, boot, point, before.turning, deviceGapMs);
	}
	waitingTaps(d, boot, point, receivedAt);
}

/**
 * The greatest totals of a boot are its state: order, loss and doubles cannot change them. Totals no spindle can reach
 * wait for the maker's word. Returns false when the moment speaks of a level that waits.
 */
function raise(d: Draft, boot: BootState, point: Point, receivedAt: number): boolean {
	const { config, s } = d;
	const grown = Math.max(0, point.f - boot.f) + Math.max(0, point.v - boot.v);
	const held = boot.held;
	if (held) {
		if (point.f >= held.f && point.v >= held.v) {
			held.f = point.f;
			held.v = point.v;
			held.t = Math.max(held.t, point.t);
			held.against = 0;
			return false;
		}
		if (point.f < held.firstF || point.v < held.firstV) {
			if (point.t > held.t) held.against += 1;
			if (held.against >= 3) {
				boot.held = null;
				if (s.run?.question === 'jump') clearQuestion(s.run);
				say(d, 'jump-gone', d.now);
			}
		} else return false;
	}
	if (grown === 0) return true;

	const elapsedMs = Math.max(point.t - Math.max(boot.t, 0), (receivedAt - boot.lastAt) * config.timeScale);
	const heardBefore = boot.t >= 0;
	const run = s.run?.status === 'open' ? s.run : s.upNext;
	if (heardBefore && grown > turnsPossible(config.rpmMax, elapsedMs) && run && boot === s.boots[0]) {
		if (run.startedAt !== null && run === s.run) {
			boot.held = {
				f: point.f,
				v: point.v,
				t: point.t,
				fromF: boot.f,
				fromV: boot.v,
				firstF: point.f,
				firstV: point.v,
				at: receivedAt,
				against: 0
			};
			const keep = onBobbinNow(d, run);
			const take = onBobbinOf(run, turnsOf(run, s.boots, { b: boot.b, f: point.f, v: point.v }));
			ask(run, { kind: 'jump', keep, take });
			sayFault(d, 'jumped', wallAt(boot, point.t, config.timeScale), { keep, take });
			return false;
		}
		// Nothing on the bobbin yet: the jump is noted and zero moves along with it.
		sayFault(d, 'jumped', wallAt(boot, point.t, config.timeScale), { turns: grown });
		for (const stretch of run.stretches) {
			if (stretch.b !== boot.b || stretch.toF !== null) continue;
			stretch.fromF += Math.max(0, point.f - boot.f);
			stretch.fromV += Math.max(0, point.v - boot.v);
		}
	}
	boot.f = Math.max(boot.f, point.f);
	boot.v = Math.max(boot.v, point.v);
	return true;
}

function keepTrail(s: WinderState, point: Point): void {
	let i = s.trail.length;
	while (i > 0 && s.trail[i - 1]!.t > point.t) i -= 1;
	s.trail.splice(i, 0, point);
	const newest = s.trail[s.trail.length - 1]!.t;
	if (s.trail.length > 60 || newest - s.trail[0]!.t > trailTickMs * 2) {
		s.trail = s.trail.filter((kept) => newest - kept.t <= (kept.k ? trailEventsMs : trailTickMs));
		while (s.trail.length > trailMax) s.trail.shift();
	}
}

/* ---- checks of the sensor ---- */

function checkSensor(d: Draft, boot: BootState, line: Hi | Tick | Event, receivedAt: number): void {
	if (line.verb === 'HI') return;
	if (line.x !== undefined) {
		if (!d.s.bounce || receivedAt - d.s.bounce.at > 10_000 || line.x < d.s.bounce.x) {
			d.s.bounce = { x: line.x, at: receivedAt };
		} else if (line.x - d.s.bounce.x >= 5) {
			d.s.bounce = { x: line.x, at: receivedAt };
			if (notice(d, 'bouncing')) sayFault(d, 'bouncing', receivedAt, { refused: line.x });
		}
		boot.x = Math.max(boot.x, line.x);
	}
	if (line.g !== undefined && line.g > boot.g) {
		const missed = line.g - boot.g;
		boot.g = line.g;
		notice(d, 'missed-pulses');
		sayFault(d, 'missed-pulses', receivedAt, { missed });
	}
}

/** Both clocks over at least ten seconds without a gap: more than a tenth apart and speeds cannot be trusted. */
function checkClock(d: Draft, boot: BootState, t: number, receivedAt: number, gapMs: number): void {
	if (!d.s.clock || gapMs > 3_000) {
		d.s.clock = { t, at: receivedAt };
		return;
	}
	const wallMs = receivedAt - d.s.clock.at;
	if (wallMs < 15_000) return;
	const ratio = (t - d.s.clock.t) / d.config.timeScale / wallMs;
	if (ratio < 0.9 || ratio > 1.1) {
		// The smallest delay of a minute means nothing on a clock that drifts away: the latest one is nearer.
		boot.offsets = [[Math.floor(receivedAt / 5_000), boot.offsetLast]];
		if (notice(d, 'clock-odd')) sayFault(d, 'clock-odd', receivedAt, { ratio: Math.round(ratio * 100) / 100 });
	}
	d.s.clock = { t, at: receivedAt };
}

function checkPulses(d: Draft, boot: BootState, point: Point): void {
	const turns = boot.f + boot.v;
	const window = d.s.pulse;
	if (!boot.turning || point.r === 0 || boot.held) {
		d.s.pulse = null;
		return;
	}
	if (!window) {
		d.s.pulse = { t: point.t, turns, rpmSum: 0, rpmCount: 0 };
		return;
	}
	const rpm = Math.abs(point.r);
	const next = { ...window, rpmSum: window.rpmSum + rpm, rpmCount: window.rpmCount + 1 };
	d.s.pulse = next;
	// Speeding up or slowing down says nothing about pulses.
	const mean = next.rpmSum / next.rpmCount;
	if (next.rpmCount > 2 && Math.abs(rpm - mean) > mean * 0.25) d.s.pulse = null;
	else if (point.t - next.t >= pulseWindowMs && next.rpmCount >= pulseSpeedsMin) {
		const factor = pulsesOff(next, point.t, turns);
		d.s.pulse = { t: point.t, turns, rpmSum: 0, rpmCount: 0 };
		if (factor !== null) {
			notice(d, 'pulses-per-turn');
			const run = d.s.run;
			if (run && !run.said.ppr) {
				run.said.ppr = true;
				sayFault(d, 'pulses-per-turn', d.now, { factor });
			}
		}
	}
}

/* ---- following the run ---- */

function ask(run: RunCore, detail: QuestionDetail): void {
	run.question = detail.kind;
	run.questionDetail = detail;
}

function clearQuestion(run: RunCore): void {
	run.question = null;
	run.questionDetail = null;
}

/** An event of before the latest moment: it says when the spindle went and stood, and for which look. */
function moveSeen(d: Draft, boot: BootState, point: Point): void {
	if (point.k !== 'go' && point.k !== 'stop') return;
	const axis = axisAt(boot, point.t, d.config.timeScale);
	for (const run of [d.s.run, d.s.upNext]) {
		if (!run || run.startAxis === null || axis < run.startAxis || (run.endAxis !== null && axis > run.endAxis))
			continue;
		addMove(run, axis, point.k === 'go' ? 1 : 0);
		if (point.k !== 'stop') continue;
		const turns = onBobbinOf(run, turnsOf(run, d.s.boots, { b: boot.b, f: point.f, v: point.v }));
		const mark = run.lookUnseen.find(
			(unseen) => turns >= unseen - rearmTurns && turns <= unseen + lookPassedAfterTurns
		);
		if (mark === undefined) continue;
		run.lookUnseen = run.lookUnseen.filter((unseen) => unseen !== mark);
		run.looks.push({ mark, turns, note: null });
		run.looks.sort((a, b) => a.turns - b.turns);
		say(d, 'look-seen', wallAt(boot, point.t, d.config.timeScale), { turns, detail: { mark, note: null } });
	}
}

/** The newest moment of the current boot, in the life of its run. */
function follow(d: Draft, boot: BootState, point: Point, wasTurning: boolean, deviceGapMs: number): void {
	const { s, config } = d;
	const at = wallAt(boot, point.t, config.timeScale);
	const axis = axisAt(boot, point.t, config.timeScale);

	if (s.upNext && s.run?.status !== 'open' && turnsOf(s.upNext, s.boots) >= 1) promote(d);
	const run = s.run;
	if (!run || run.status !== 'open') {
		if (s.end && boot.turning !== wasTurning)
			s.end = { ...s.end, moves: [...s.end.moves, [axis, boot.turning ? 1 : 0]] };
		return;
	}

	// While a keep waits for lines, what comes may belong to the next coil: only its moves are noted.
	const ending = run.pending !== null && (run.pending.tap.kind === 'keep' || run.pending.tap.kind === 'set-aside');

	const hadBegun = run.moves.length > 0;
	if (run.startedAt === null) begin(d, run, boot, point, at);
	if (run.startedAt === null) return;

	run.rpmTop = Math.max(run.rpmTop, ending ? 0 : Math.abs(point.r));
	const went = boot.turning && !wasTurning;
	const stood = !boot.turning && wasTurning;
	if (went) {
		addMove(run, axis, 1);
		if (hadBegun && !ending) say(d, 'went-on', at);
		run.standingSince = null;
		if (run.question === 'did-you-stop') clearQuestion(run);
	}
	if (stood) {
		addMove(run, axis, 0);
		run.standingSince = axis;
	}
	if (run.moves.length === 0 && boot.turning) addMove(run, run.startAxis ?? axis, 1);
	if (!boot.turning && run.standingSince === null) run.standingSince = axis;
	if (ending) return;

	const onBobbin = onBobbinNow(d, run);
	if (stood) {
		say(d, 'stopped', at);
		judgeStop(d, run, onBobbin, at);
	}

	const back = takenBackOf(run, s.boots, !config.seesDirection);
	if (back > run.takenBackSaid && (!boot.turning || point.r > 0 === signOf(run.plan, config) > 0)) {
		say(d, 'taken-back', at, { detail: { turns: back - run.takenBackSaid, total: back } });
		run.takenBackSaid = back;
	}
	if (run.snapOpen?.answered && !boot.turning) closeSnap(d, run);
	if (onBobbin >= settledTurns || run.looks.length > 0) run.settled = true;
	if (!run.takingOff) {
		followLooks(d, run, boot, onBobbin, at, deviceGapMs);
		followMarks(d, run, boot, onBobbin, at);
	}
}

/** A run begins when its spindle begins to move; a start tap may say otherwise. */
function begin(d: Draft, run: RunCore, boot: BootState, point: Point, at: number): void {
	if (run.pending?.tap.kind === 'start') return;
	const turns = turnsOf(run, d.s.boots);
	if (turns >= 1) {
		// When it moved: the first go since the count was at zero.
		let movedT = point.t;
		for (let i = d.s.trail.length - 1; i >= 0; i -= 1) {
			const earlier = d.s.trail[i]!;
			if (turnsOf(run, d.s.boots, { b: boot.b, f: earlier.f, v: earlier.v }) < 1) {
				if (earlier.k === 'go' || earlier.r !== 0) movedT = earlier.t;
				if (earlier.k === 'go' || earlier.k === 'stop') break;
			} else movedT = earlier.t;
		}
		const movedAxis = run.moves[0]?.[0] ?? axisAt(boot, movedT, d.config.timeScale);
		run.startedAt = wallAt(boot, movedT, d.config.timeScale);
		run.startAxis = movedAxis;
		if (run.moves.length === 0) addMove(run, movedAxis, 1);
		say(d, 'moved', run.startedAt, { turns: 0 });
	} else if (turns <= -rearmTurns) {
		if (notice(d, 'wrong-way') && !run.said.wrongWay) {
			run.said.wrongWay = true;
			sayFault(d, 'wrong-way', at, { turns: -turns });
		}
	}
	// Turned back by hand and standing: zero is where it stands.
	if (turns < 0 && !boot.turning) {
		for (const stretch of run.stretches) {
			if (stretch.b !== boot.b || stretch.toF !== null) continue;
			stretch.fromF = boot.f;
			stretch.fromV = boot.v;
		}
	}
}

/** Standing after turning: did it coast down, or did the pulses end? */
function judgeStop(d: Draft, run: RunCore, onBobbin: number, at: number): void {
	const cue = cuesOf(run, d.config, onBobbin, true).cue;
	// A stop that was asked for may well be a brake.
	if (run.question !== null || run.takingOff || (cue !== null && cue !== 'look-coming')) return;
	const rpm = endedAtSpeed(d.s.trail);
	if (rpm === null) return;
	ask(run, { kind: 'did-you-stop', at: onBobbin, rpm });
	sayFault(d, 'pulses-ended', at, { rpm });
}

function followLooks(d: Draft, run: RunCore, boot: BootState, onBobbin: number, at: number, gapMs: number): void {
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

function finishLook(
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

function followMarks(d: Draft, run: RunCore, boot: BootState, onBobbin: number, at: number): void {
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

/* ---- coils ---- */

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
	const { lookEvery, target } = coil.plan;
	const first = fresh && lookEvery > firstLookTurns && target > 2 * firstLookTurns ? firstLookTurns : 0;
	const run = newRun(coil.runId, coil.plan, coil.sticker, now, first);

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
		run.stretches.push({
			b: boot.b,
			sign: signOf(run.plan, config),
			fromF: zero.f,
			fromV: zero.v,
			toF: null,
			toV: null
		});
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

/** The coil up next becomes the run; the one before it can be undone no more. */
function promote(d: Draft): void {
	const { s } = d;
	rememberLast(s);
	s.run = s.upNext;
	s.upNext = null;
	s.end = null;
}

function rememberLast(s: WinderState): void {
	const run = s.run;
	if (!run || run.status === 'open') return;
	s.last = {
		runId: run.runId,
		name: run.plan.name,
		state: run.status,
		onBobbin: onBobbinOf(run, turnsOf(run, s.boots)),
		sticker: run.sticker
	};
}

/* ---- taps ---- */

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
		settle(d, run, false);
		pending = run.pending !== null;
		if (pending) say(d, 'tap-waiting', madeAt, { detail: { tap: tap.kind }, memberId: tap.memberId });
	} else if (tap.kind === 'undo') undo(d, run, tap);
	else act(d, run, tap, madeAt, null);

	const answer: TapAnswer = { ok: true, pending };
	d.s.tapsDone.push([tap.id, answer]);
	if (d.s.tapsDone.length > tapsDoneMax) d.s.tapsDone.shift();
	return { state: d.s, facts: d.facts, answer };
}

function whyNot(d: Draft, tap: Tap): TapRefusal | null {
	const run = d.s.run;
	if (!run) return 'no-run';
	const boot = d.s.boots[0];
	const onBobbin = onBobbinNow(d, run);
	const heard = boot ? linkStateOf(d.now - boot.lastAt, boot.turning) : 'never';
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

/** A moment of the boot a tap waits for came in: it narrows the tap's place. */
function waitingTaps(d: Draft, boot: BootState, point: Point, receivedAt: number): void {
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
function settle(d: Draft, run: RunCore, anyway: boolean): void {
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
function act(d: Draft, run: RunCore, tap: Tap, madeAt: number, point: Point | null, pending?: PendingTap): void {
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
				run.stretches = [
					{ b: boot.b, sign: signOf(run.plan, config), fromF: point.f, fromV: point.v, toF: null, toV: null }
				];
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
			if (!config.seesDirection && boot && point) turnStretch(run, boot.b, point, off ? -1 : 1);
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

function turnStretch(run: RunCore, b: string, point: Point, sign: 1 | -1): void {
	for (const stretch of run.stretches) {
		if (stretch.b !== b || stretch.toF !== null) continue;
		stretch.toF = point.f;
		stretch.toV = point.v;
	}
	run.stretches.push({ b, sign, fromF: point.f, fromV: point.v, toF: null, toV: null });
}

/** The spindle stands and the maker has said where the wire left: what turned since carried none. */
function closeSnap(d: Draft, run: RunCore): void {
	const snap = run.snapOpen!;
	const turns = turnsOf(run, d.s.boots);
	const emptyTurns = Math.max(0, turns - run.emptyTurns - snap.leftAt);
	run.snaps.push({ saidAt: snap.saidAt, leftAt: snap.leftAt, emptyTurns });
	run.emptyTurns += emptyTurns;
	run.snapOpen = null;
}

/** Kept or set aside, at the totals of the tap. What turned since belongs to the next coil. */
function end(
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
			s.upNext.stretches = [
				{ b: boot.b, sign: signOf(s.upNext.plan, config), fromF: point.f, fromV: point.v, toF: null, toV: null }
			];
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

function undo(d: Draft, run: RunCore, tap: Tap): void {
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

/* ---- time ---- */

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

/* ---- commands ---- */

/**
 * What the device is to be told now.
 *
 * @param mode `all`: an answer to a poll, which carries the plan until it is answered; `changed`: down a socket, again each second
 */
export function commands(
	state: WinderState,
	config: WinderConfig,
	now: number,
	mode: 'changed' | 'all'
): { state: WinderState; lines: HostLine[] } {
	const boot = state.boots[0];
	if (!boot) return { state, lines: [] };
	const lines: HostLine[] = [];
	let next = state;

	const plan = planFor(state, config);
	if (plan) {
		const content = JSON.stringify(plan);
		let set = state.set;
		if (!set || set.content !== content || set.b !== boot.b) {
			set = { id: (state.commandId % 0xffff_fffe) + 1, content, b: boot.b, answered: false, sentAt: 0 };
			next = { ...next, commandId: set.id };
		}
		if (!set.answered && (mode === 'all' || now - set.sentAt >= setAgainMs)) {
			lines.push({ verb: 'SET', id: set.id, ...plan });
			set = { ...set, sentAt: now };
		}
		if (set !== state.set) next = { ...next, set };
	}

	if (hasEventGap(boot)) {
		const again = boot.syncFor === boot.e;
		const due = !again || (boot.syncCount < syncMax && now - boot.syncAt >= syncAgainMs * 2 ** (boot.syncCount - 1));
		if (due) {
			lines.push({ verb: 'SYNC', b: boot.b, e: boot.e });
			const asked = { ...boot, syncFor: boot.e, syncCount: again ? boot.syncCount + 1 : 1, syncAt: now };
			next = { ...next, boots: [asked, ...next.boots.slice(1)] };
		}
	}
	const waits = state.run?.pending && !state.run.pending.after && state.run.pending.b === boot.b;
	if (waits && now - state.askedAt >= askAgainMs) {
		lines.push({ verb: '?' });
		next = { ...next, askedAt: now };
	}
	return { state: next, lines };
}

/** The plan of the run in absolute turns of the current boot. */
function planFor(state: WinderState, config: WinderConfig): Omit<SetPlan, 'verb' | 'id'> | null {
	const boot = state.boots[0]!;
	const run = state.run?.status === 'open' ? state.run : state.upNext;
	if (!run || run.takingOff || run.snapOpen || run.pending || boot.held) return null;
	const sign = signOf(run.plan, config);
	const zero = net(boot) - sign * onBobbinOf(run, turnsOf(run, state.boots));
	return {
		b: boot.b,
		tgt: zero + sign * run.plan.target,
		look: run.plan.lookEvery,
		ease: config.easeEarlyTurns,
		stop: config.stopEarlyTurns,
		from: zero,
		fst: run.firstLook
	};
}

/** What may be acknowledged once it is on disk: the greatest line number, and the events without a gap. */
export function ackOf(state: WinderState, b?: string): { b: string; n: number; e: number } | null {
	const boot = b === undefined ? state.boots[0] : state.boots.find((known) => known.b === b);
	return boot ? { b: boot.b, n: boot.n, e: boot.e } : null;
}

/* ---- reading ---- */

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
		link: linkStateOf(ageMs, turning),
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

/** A stretch of a run in one boot: turns at a moment = base + sign · (f − v − zeroNet), for t from `fromT` to `toT`. */
export interface Span {
	b: string;
	sign: 1 | -1;
	base: number;
	zeroNet: number;
	fromT: number;
	toT: number | null;
}

/** The stretches of the run of that id, so that its lines can be found again. Device times are unwrapped ms. */
export function spansOf(state: WinderState, config: WinderConfig, runId: string): Span[] {
	const run = [state.run, state.upNext].find((known) => known?.runId === runId);
	if (!run || run.startAxis === null) return [];
	let base = run.adjust;
	const spans: Span[] = [];
	for (const stretch of run.stretches) {
		const boot = state.boots.find((known) => known.b === stretch.b);
		const zeroNet = stretch.fromF - stretch.fromV;
		if (boot) {
			const zero = axisAt(boot, 0, config.timeScale);
			const toT = run.endAxis === null ? null : run.endAxis - zero;
			spans.push({ b: stretch.b, sign: stretch.sign, base, zeroNet, fromT: run.startAxis - zero, toT });
		}
		const end = { f: stretch.toF ?? boot?.f ?? stretch.fromF, v: stretch.toV ?? boot?.v ?? stretch.fromV };
		base += stretch.sign * (net(end) - zeroNet);
	}
	return spans;
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

/** What is taken in of the current boot: committed with every batch. A jump that waits for a word is not in it. */
export interface Cursor {
	boot: string;
	n: number;
	e: number;
	forward: number;
	reverse: number;
	t: number;
}

export function cursorOf(state: WinderState): Cursor | null {
	const boot = state.boots[0];
	if (!boot) return null;
	return { boot: boot.b, n: boot.n, e: boot.e, forward: boot.f, reverse: boot.v, t: boot.t };
}

/** A cursor that committed after the state was last written: the greatest totals win. */
export function mergeCursor(state: WinderState, cursor: Cursor): WinderState {
	const known = state.boots.find((boot) => boot.b === cursor.boot);
	if (!known) return state;
	const boot = copyBoot(known);
	if (cursor.n > boot.n) addLine(boot, cursor.n, 0);
	if (cursor.n > known.n + 1) {
		// Everything up to the cursor was taken in before it committed.
		for (let i = boot.seen.length - 2; i >= 2; i -= 2) boot.seen.splice(i - 1, 2);
	}
	boot.e = Math.max(boot.e, cursor.e);
	boot.eBeyond = boot.eBeyond.filter((e) => e > boot.e);
	boot.eTop = Math.max(boot.eTop, boot.e);
	if (!boot.held) {
		boot.f = Math.max(boot.f, cursor.forward);
		boot.v = Math.max(boot.v, cursor.reverse);
	}
	boot.t = Math.max(boot.t, cursor.t);
	return { ...state, boots: state.boots.map((entry) => (entry === known ? boot : entry)) };
}
