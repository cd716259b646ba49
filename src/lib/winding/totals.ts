import type { Event, Hi, Tick } from '../turnline/types.ts';
import { settle } from './acts.ts';
import { wallAt, type BootState, type Point } from './boot.ts';
import { turnsPossible } from './plausible.ts';
import { newStretch, onBobbinOf, signOf, turnsOf } from './run.ts';
import { type WinderState, type Draft, say, sayFault, notice, onBobbinNow, ask, clearQuestion } from './state.ts';

/** Boots and their totals: a new one, one that continues another, one that jumps, two at once. */

const bootsMax = 4;
/** "Beyond 5 s no bound": what a spindle did meanwhile is anybody's guess. */
const restartBoundMs = 5_000;
/** The trail keeps ticks long enough to see a coast-down, and events long enough for a tap that comes half an hour late. */
const trailTickMs = 4_000;
const trailEventsMs = 1_800_000;
const trailMax = 160;

/** A boot not heard of before becomes the current one. */
export function enterBoot(d: Draft, boot: BootState, line: Hi | Tick | Event): void {
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
		const sign = run.takingOff && !d.config.seesDirection ? -1 : signOf(run.plan, d.config);
		run.stretches.push(newStretch(boot, sign, fromZero ? { f: 0, v: 0 } : line, d.config.timeScale));
	}
	const run = d.s.run;
	if (before && run && run.status === 'open' && run.startedAt !== null && !boot.bridged) {
		const gapMs = Math.max(0, bornAt - before.lastAt) * d.config.timeScale;
		const uncertain = gapMs <= restartBoundMs ? Math.ceil((Math.abs(before.r) / 60_000) * gapMs) : null;
		const at = onBobbinNow(d, run);
		// A second restart before the first was answered: what is uncertain adds up.
		const open = run.questionDetail?.kind === 'restarted' ? run.questionDetail : null;
		const uncertainTurns =
			open && uncertain !== null && open.uncertainTurns !== null
				? open.uncertainTurns + uncertain
				: open
					? null
					: uncertain;
		ask(run, { kind: 'restarted', at, uncertainTurns });
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
export function maybeBridge(d: Draft, boot: BootState, line: Hi): void {
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
export function watchForTwins(d: Draft, boot: BootState, t: number, receivedAt: number): void {
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

/**
 * The greatest totals of a boot are its state: order, loss and doubles cannot change them. Totals no spindle can reach
 * wait for the maker's word. Returns false when the moment speaks of a level that waits.
 */
export function raise(d: Draft, boot: BootState, point: Point, receivedAt: number): boolean {
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

export function keepTrail(s: WinderState, point: Point): void {
	let i = s.trail.length;
	while (i > 0 && s.trail[i - 1]!.t > point.t) i -= 1;
	s.trail.splice(i, 0, point);
	const newest = s.trail[s.trail.length - 1]!.t;
	if (s.trail.length > 60 || newest - s.trail[0]!.t > trailTickMs * 2) {
		s.trail = s.trail.filter((kept) => newest - kept.t <= (kept.k ? trailEventsMs : trailTickMs));
		while (s.trail.length > trailMax) s.trail.shift();
	}
}
