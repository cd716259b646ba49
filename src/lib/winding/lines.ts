import type { DeviceLine, Event, Hi, Tick } from '../turnline/types.ts';
import { settle, waitingTaps } from './acts.ts';
import {
	addEvent,
	addLine,
	hasEvent,
	hasLine,
	learnOffset,
	recentSum,
	loseEvents,
	newBoot,
	sumOf,
	unwrapT,
	wallAt,
	type BootState,
	type Point
} from './boot.ts';
import { moveSeen, follow } from './follow.ts';
import { checkSensor, checkClock, checkPulses } from './sensor.ts';
import { type WinderState, type Draft, draft, say, sayFault, notice } from './state.ts';
import { enterBoot, maybeBridge, watchForTwins, raise, keepTrail } from './totals.ts';
import type { Fact, WinderConfig } from './types.ts';

/** Lines of a device, one at a time, in whatever order they come. */

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

const keepTickMs = 1_000;
const keepTickTurns = 10;

/**
 * One line of the device.
 *
 * @param receivedAt wall ms at which it came in
 */
export function takeLine(state: WinderState, config: WinderConfig, line: DeviceLine, receivedAt: number): LineStep {
	// A birth line may continue any boot before it.
	const d = draft(state, config, receivedAt, line.verb === 'HI' ? undefined : line.b);
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
	if (line.verb === 'BYE') {
		takeGoodbye(d, line.b);
		return done('thinned');
	}

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
		const first = recentSum(boot, line.n);
		const mismatch = first !== null && first !== sum;
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

/**
 * The last line before the power goes: no more lines come, so the spindle stands for all anybody can know, and a tap that
 * waits for lines is placed at the last of them.
 */
function takeGoodbye(d: Draft, b: string | undefined): void {
	const boot = d.s.boots[0];
	if (!boot || (b !== undefined && b !== boot.b)) return;
	boot.signedOffAt = d.now;
	say(d, 'signed-off', d.now);
	if (d.s.run?.pending?.b === boot.b) settle(d, d.s.run, true);
}

function takeAnswer(d: Draft, b: string, ok: boolean, id: number | undefined, why: string | undefined): void {
	const boot = d.s.boots.find((known) => known.b === b);
	if (boot && !ok && why === 'gone') {
		const lost = loseEvents(boot);
		if (lost > 0) sayFault(d, 'event-lost', d.now, { events: lost });
	}
	if (!d.s.set || id === undefined || d.s.set.id !== id || d.s.set.b !== b) return;
	if (!ok && why === 'old') {
		// The winder heard greater numbers, from before an older backup was restored here: the plan goes again beyond them.
		d.s.commandId += commandsSkipped;
		d.s.set = null;
	} else d.s.set = { ...d.s.set, answered: true };
}

/** Commands of some hours: few steps lead past whatever a restored backup forgot. */
const commandsSkipped = 1_000;

/** After its first pulse a winder knows no speed yet: a spindle whose count has just grown does not stand. */
const speedUnknownMs = 1_000;

function stillGoing(boot: BootState, point: Point, gapMs: number): boolean {
	// After a gap the count may have grown at any moment of it: then the speed said is all there is.
	return boot.turning && gapMs < speedUnknownMs && point.t - boot.grownT < speedUnknownMs;
}

function movedSince(boot: BootState, trail: readonly Point[], stop: Point): boolean {
	return boot.f + boot.v > stop.f + stop.v || trail.some((point) => point.k === 'go' && point.t > stop.t);
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
	const before = { turning: boot.turning, sum: boot.f + boot.v };
	if (!s.run && s.idle?.b !== boot.b) s.idle = { b: boot.b, f: first ? point.f : boot.f, v: first ? point.v : boot.v };
	const counts = raise(d, boot, point, receivedAt);
	if (point.f + point.v > before.sum) boot.grownT = Math.max(boot.grownT, point.t);
	keepTrail(s, point);

	if (!late) {
		boot.t = point.t;
		boot.lastAt = receivedAt;
		boot.signedOffAt = null;
		boot.r = point.r;
		if (point.k === 'go') boot.turning = true;
		else if (point.k === 'stop') boot.turning = false;
		else if (line.r !== undefined) boot.turning = line.r !== 0 || stillGoing(boot, point, deviceGapMs);
		else if (first) boot.turning = false;
		checkSensor(d, boot, line, receivedAt);
		if (!first && line.verb === 'T') checkClock(d, boot, point.t, receivedAt, gapMs);
		checkPulses(d, boot, point);
	}
	// A stop that comes after a later tick: nothing has been counted since, so it is how the spindle is now.
	const stillStands = late && point.k === 'stop' && boot.turning && !movedSince(boot, s.trail, point);
	if (stillStands) {
		boot.turning = false;
		boot.r = 0;
	}
	if (counts) {
		if (late && !stillStands) moveSeen(d, boot, point);
		else follow(d, boot, point, before.turning, deviceGapMs);
	}
	waitingTaps(d, boot, point, receivedAt);
}
