import {
	answersKeptMin,
	formatLine,
	i16Max,
	lineBytesMax,
	parseHostLine,
	protocolVersion,
	replayLinesPerSecondMax,
	ringLinesMin,
	stopVoidMs,
	type Event,
	type EventKind,
	type Hi,
	type HostLine,
	type SetPlan,
	type StopAsk,
	type Tick
} from '../src/lib/turnline/index.ts';
import { cuesAt, lookPassedAfterTurns, rearmTurns, type CuesNow } from '../src/lib/winding/cues.ts';
import type { CuePlan } from '../src/lib/winding/types.ts';
import { Counter } from './counter.ts';
import type { Edge } from './physics.ts';
import { bootIdFrom, type Random } from './random.ts';
import { isEvent, Ring, type KeptLine } from './ring.ts';

/**
 * The winder's firmware: edges in, lines out, as firmware-protocol/PROTOCOL.md asks of a device. Pure: every call is
 * told the time, in simulated milliseconds; the carrier takes lines when it can and hands over what the host says.
 */

export interface DeviceTraits {
	/** `dev`: a word of at most 16 characters. */
	name: string;
	pulsesPerTurn: number;
	seesDirection: boolean;
	/** Highest speed of the spindle, for the refusal of bounces. */
	rpmMax: number;
	/** Lines it can keep. */
	bufLines: number;
	/** Totals survive a reset. */
	retains: boolean;
	/** How much faster than the wall clock its time runs. Pace of sending and waiting follow the wall. */
	timeScale: number;
}

export const ordinaryDevice: DeviceTraits = {
	name: 'winder',
	pulsesPerTurn: 1,
	seesDirection: true,
	rpmMax: 1200,
	bufLines: 256,
	retains: false,
	timeScale: 1
};

/** Wall milliseconds between ticks. */
const tickMs = { turning: 100, standing: 1000 };
/** An event not acknowledged for so long, in wall milliseconds, is sent again without being asked for. */
const resendMs = 2000;
/** Of the ticks of a replay one goes for so many report periods: one a second. */
const replayThinning = 10;
/** Live ticks waiting for a slow carrier; older ones are left to the replay. */
const liveTicksMax = 60;
/** The spindle stands when no pulse came for this many of its last periods, within these bounds of device time. */
const standing = { periods: 3, leastMs: 500, mostMs: 3000, unknownMs: 2000 };
/** A coil of more turns is a mistake. */
const turnsMax = 10_000_000;

/** The plan a SET brought. */
export interface DevicePlan {
	set: SetPlan;
	/** Absolute net turns of the coil's zero. */
	from: number;
	sign: 1 | -1;
	cue: CuePlan;
}

/** What else may want to know of the firmware's doings; the truth log does. */
export interface DeviceWatcher {
	event?(line: Event): void;
	acknowledged?(events: Event[]): void;
	lost?(event: Event): void;
	plan?(plan: DevicePlan): void;
}

/** What memory that survives holds: a boot the host knows, and its totals continued to now. */
export interface Retained {
	b: string;
	f: number;
	v: number;
}

/** All that a reset of the microcontroller clears. */
interface Boot {
	b: string;
	bornMs: number;
	n: number;
	e: number;
	pulsesForward: number;
	pulsesReverse: number;
	missed: number;
	counter: Counter;
	ring: Ring;
	turning: boolean;
	lastPulseMs: number;
	periodMs: number | null;
	periodBeforeMs: number | null;
	periodInDoubtMs: number | null;
	heading: 1 | -1;
	tickDueMs: number;
	plan: DevicePlan | null;
	fired: { ease: boolean; at: boolean; over: boolean; look: number };
	answers: { id: number; text: string }[];
	newestSet: number | null;
	acknowledgedAny: boolean;
}

export class Device {
	private now: Boot;
	/** Totals of the last boot the host acknowledged, continued up to this one; in memory that survives, if there is any. */
	private retained: Retained | null = null;

	private linked = false;
	private heldUntilMs = -Infinity;
	private stopUntilMs = -Infinity;
	private urgent: string[] = [];
	private live: KeptLine[] = [];
	private replay: KeptLine[] = [];
	private replayCredit = 0;
	private takenMs = 0;
	private resendCheckMs = 0;

	constructor(
		readonly traits: DeviceTraits,
		private readonly random: Random,
		nowMs: number,
		private readonly watcher: DeviceWatcher = {},
		/** What that memory held when the supply came on. */
		found: Retained | null = null
	) {
		this.retained = found;
		this.now = this.born(nowMs);
	}

	/** What memory that survives would hold if the supply went now. */
	get memory(): Retained | null {
		return this.traits.retains ? this.continued() : null;
	}

	get boot(): string {
		return this.now.b;
	}
	get forward(): number {
		return Math.floor(this.now.pulsesForward / this.traits.pulsesPerTurn);
	}
	get reverse(): number {
		return Math.floor(this.now.pulsesReverse / this.traits.pulsesPerTurn);
	}
	get net(): number {
		return this.forward - this.reverse;
	}
	get turning(): boolean {
		return this.now.turning;
	}
	get plan(): DevicePlan | null {
		return this.now.plan;
	}
	get ring(): Ring {
		return this.now.ring;
	}
	get lastEvent(): number {
		return this.now.e;
	}
	get refusedPulses(): number {
		return this.now.counter.refused;
	}
	get suspectedMissed(): number {
		return this.now.missed;
	}
	/** Everything that must not be forgotten has been acknowledged. */
	get settled(): boolean {
		return this.now.ring.events.length === 0;
	}

	/** Turns of the coil under the plan, or null without one. */
	get turns(): number | null {
		const plan = this.now.plan;
		if (!plan) return null;
		return plan.sign > 0 ? this.net - plan.from : plan.from - this.net;
	}

	/** What its lamps and its display tell the maker. */
	get cues(): CuesNow | null {
		return this.now.plan && cuesAt(this.now.plan.cue, this.turns!, this.now.turning);
	}

	/** The speed between the last two pulses, signed; 0 standing. It is never guessed between pulses. */
	get rpm(): number {
		if (!this.now.turning || this.now.periodMs === null) return 0;
		const rpm = Math.round(60_000 / (this.now.periodMs * this.traits.pulsesPerTurn));
		return this.now.heading * Math.min(rpm, i16Max);
	}

	/** Whether the stop output holds the motor off. */
	motorReleased(nowMs: number): boolean {
		return nowMs < this.stopUntilMs;
	}

	/** The sensor's output changed. */
	edge(edge: Edge): void {
		const boot = this.now;
		const pulse = boot.counter.take(edge);
		if (pulse === null) return;
		if (!boot.turning) {
			boot.turning = true;
			boot.periodMs = boot.periodBeforeMs = boot.periodInDoubtMs = null;
			this.raise('go', edge.atMs);
			boot.tickDueMs = edge.atMs;
		} else this.measure(edge.atMs - boot.lastPulseMs);
		boot.lastPulseMs = edge.atMs;
		if (pulse > 0) boot.pulsesForward++;
		else boot.pulsesReverse++;
		if (pulse !== boot.heading) {
			boot.heading = pulse;
			this.raise('rev', edge.atMs);
		}
		this.callOut(edge.atMs);
	}

	/** Time goes on without an edge: standing still, ticks, events to send again. */
	pass(nowMs: number): void {
		const boot = this.now;
		if (boot.turning) {
			const waitMs =
				boot.periodMs === null
					? standing.unknownMs
					: Math.min(standing.mostMs, Math.max(standing.leastMs, standing.periods * boot.periodMs));
			if (nowMs - boot.lastPulseMs >= waitMs) {
				boot.turning = false;
				this.dealWithLook();
				this.raise('stop', nowMs);
				boot.tickDueMs = nowMs + tickMs.standing * this.traits.timeScale;
			}
		}
		if (nowMs >= boot.tickDueMs) {
			this.tick(nowMs);
			const slow = !boot.turning || nowMs < this.heldUntilMs;
			const periodMs = (slow ? tickMs.standing : tickMs.turning) * this.traits.timeScale;
			// By the grid, so that the loop's own pace does not add up; never several at once.
			boot.tickDueMs = Math.max(boot.tickDueMs + periodMs, nowMs + periodMs / 2);
		}
		if (this.linked && nowMs >= this.resendCheckMs) this.sendAgain(nowMs);
	}

	/** The button on the winder. */
	press(nowMs: number): void {
		this.raise('btn', nowMs);
	}

	/** The carrier has a link: birth line first, then what the host may not have. */
	linkUp(nowMs: number): void {
		this.linked = true;
		this.urgent = [this.birthLine(nowMs)];
		this.live = [];
		const ticks: KeptLine[] = [];
		const apartMs = replayThinning * tickMs.turning * this.traits.timeScale;
		for (const kept of [...this.now.ring.lines].reverse()) {
			const newest = ticks[ticks.length - 1];
			if (!isEvent(kept) && (!newest || newest.madeMs - kept.madeMs >= apartMs)) ticks.push(kept);
		}
		this.replay = [...this.now.ring.events, ...ticks];
		this.takenMs = nowMs;
		this.replayCredit = 0;
	}

	linkDown(): void {
		this.linked = false;
		this.urgent = [];
		this.live = [];
		this.replay = [];
		this.heldUntilMs = -Infinity;
	}

	/** The lines to send now, in the order to send them. While the host asked to hold there is no replay. */
	take(nowMs: number): string[] {
		if (!this.linked) return [];
		const texts = this.urgent;
		this.urgent = [];
		const hand = (kept: KeptLine) => {
			kept.sentMs = nowMs;
			texts.push(kept.text);
		};
		for (const kept of this.live) hand(kept);
		this.live = [];
		const perMs = replayLinesPerSecondMax / 1000 / this.traits.timeScale;
		// No more than a tenth of a second's worth at once, or a slow carrier would turn the rate into bursts.
		this.replayCredit = Math.min(this.replayCredit + (nowMs - this.takenMs) * perMs, replayLinesPerSecondMax / 10);
		this.takenMs = nowMs;
		if (nowMs < this.heldUntilMs) return texts;
		while (this.replay.length > 0 && this.replayCredit >= 1) {
			const kept = this.replay.shift()!;
			if (kept.gone) continue;
			this.replayCredit--;
			hand(kept);
		}
		return texts;
	}

	/** A line of the host. What cannot be read is not acted on. */
	hear(text: string, nowMs: number): void {
		const parsed = parseHostLine(text);
		if (!parsed.ok) {
			if (parsed.why === 'verb') this.answer({ verb: 'NO', b: this.boot, why: 'verb' });
			return;
		}
		if (parsed.line) this.obey(parsed.line, nowMs);
	}

	/**
	 * The microcontroller restarts: everything in plain memory is gone, and so is the link.
	 *
	 * @returns the events that no one will ever hear of
	 */
	restart(nowMs: number): Event[] {
		const lost = this.now.ring.events.map((kept) => kept.line);
		if (this.traits.retains) this.retained = this.continued();
		this.linkDown();
		this.stopUntilMs = -Infinity;
		this.now = this.born(nowMs);
		return lost;
	}

	/** The last line before the power goes. */
	goodbye(): string {
		return formatLine({ verb: 'BYE', b: this.boot });
	}

	private born(nowMs: number): Boot {
		return {
			b: bootIdFrom(this.random),
			bornMs: nowMs,
			n: 0,
			e: 0,
			pulsesForward: 0,
			pulsesReverse: 0,
			missed: 0,
			counter: new Counter(this.traits.seesDirection, this.traits.rpmMax, this.traits.pulsesPerTurn),
			ring: new Ring(Math.max(ringLinesMin, this.traits.bufLines)),
			turning: false,
			lastPulseMs: nowMs,
			periodMs: null,
			periodBeforeMs: null,
			periodInDoubtMs: null,
			heading: 1,
			tickDueMs: nowMs,
			plan: null,
			fired: { ease: false, at: false, over: false, look: 0 },
			answers: [],
			newestSet: null,
			acknowledgedAny: false
		};
	}

	/** A chain of boots that the host never heard of is bridged by adding up. */
	private continued(): Retained | null {
		if (this.now.acknowledgedAny) return { b: this.boot, f: this.forward, v: this.reverse };
		return (
			this.retained && {
				b: this.retained.b,
				f: this.retained.f + this.forward,
				v: this.retained.v + this.reverse
			}
		);
	}

	private timeOf(nowMs: number): number {
		return Math.floor(Math.max(0, nowMs - this.now.bornMs)) % 2 ** 32;
	}

	/** Where every number is at its longest the line would not fit: what it may carry is left out, in this order. */
	private birthLine(nowMs: number): string {
		const line = this.birth(nowMs);
		for (const key of [null, 'fw', 'rep', 'buf', 'ppr', 'dir', 'r'] as const) {
			if (key) delete line[key];
			if (bodyChars(line) + checksumBytes <= lineBytesMax) break;
		}
		return formatLine(line);
	}

	private birth(nowMs: number): Hi {
		return {
			verb: 'HI',
			p: protocolVersion,
			dev: this.traits.name,
			fw: '1.0.0',
			b: this.boot,
			n: this.now.n,
			e: this.now.e,
			f: this.forward,
			v: this.reverse,
			r: this.rpm,
			t: this.timeOf(nowMs),
			ppr: this.traits.pulsesPerTurn,
			dir: this.traits.seesDirection ? 1 : 0,
			rep: Math.round(tickMs.turning * this.traits.timeScale),
			buf: this.now.ring.linesMax,
			...(this.retained && {
				pb: this.retained.b,
				pf: this.retained.f,
				pv: this.retained.v
			})
		};
	}

	private tick(nowMs: number): void {
		const line: Tick = {
			verb: 'T',
			b: this.boot,
			n: ++this.now.n,
			e: this.now.e,
			f: this.forward,
			v: this.reverse,
			r: this.rpm,
			t: this.timeOf(nowMs),
			...(this.now.counter.refused > 0 && { x: this.now.counter.refused }),
			...(this.now.missed > 0 && { g: this.now.missed })
		};
		this.queue(this.now.ring.addTick(line, nowMs));
	}

	private raise(k: EventKind, nowMs: number): void {
		const ring = this.now.ring;
		const before = ring.events;
		if (ring.makeRoomForEvent()) {
			this.tellLost(before);
			// One report tells of all that went while it is waiting to be heard.
			if (k !== 'bufov' && !ring.events.some((kept) => kept.line.k === 'bufov')) {
				this.keepEvent('bufov', nowMs);
				this.raise(k, nowMs);
				return;
			}
		}
		this.keepEvent(k, nowMs);
	}

	private tellLost(before: (KeptLine & { line: Event })[]): void {
		for (const kept of before) if (kept.gone) this.watcher.lost?.(kept.line);
	}

	private keepEvent(k: EventKind, nowMs: number): void {
		const line: Event = {
			verb: 'E',
			b: this.boot,
			n: ++this.now.n,
			e: ++this.now.e,
			f: this.forward,
			v: this.reverse,
			r: this.rpm,
			t: this.timeOf(nowMs),
			k
		};
		this.queue(this.now.ring.addEvent(line, nowMs));
		this.watcher.event?.(line);
	}

	private queue(kept: KeptLine): void {
		if (!this.linked) return;
		this.live.push(kept);
		if (this.live.length <= liveTicksMax) return;
		const oldest = this.live.findIndex((waiting) => !isEvent(waiting));
		if (oldest >= 0) this.live.splice(oldest, 1);
	}

	private sendAgain(nowMs: number): void {
		const patienceMs = resendMs * this.traits.timeScale;
		this.resendCheckMs = nowMs + patienceMs / 8;
		const overdue = this.now.ring.events.filter(
			(kept) => kept.sentMs !== null && nowMs - kept.sentMs >= patienceMs && !this.replay.includes(kept)
		);
		this.replay.unshift(...overdue);
	}

	/** The measured period; a single one twice its neighbours is a magnet that went by unseen, suspected, never added. */
	private measure(periodMs: number): void {
		const boot = this.now;
		const near = (one: number, other: number) => Math.abs(one - other) <= 0.15 * other;
		if (boot.periodInDoubtMs !== null) {
			if (near(periodMs, boot.periodInDoubtMs / 2)) boot.missed++;
			boot.periodInDoubtMs = null;
		} else if (
			boot.periodMs !== null &&
			boot.periodBeforeMs !== null &&
			near(boot.periodMs, boot.periodBeforeMs) &&
			near(periodMs, 2 * boot.periodMs)
		)
			boot.periodInDoubtMs = periodMs;
		boot.periodBeforeMs = boot.periodMs;
		boot.periodMs = periodMs;
	}

	/** Events of the marks, each once until the count has fallen well below it. */
	private callOut(nowMs: number): void {
		const { plan, fired } = this.now;
		if (!plan) return;
		const turns = this.turns!;
		let cues = cuesAt(plan.cue, turns, true);
		// Nobody stood still for it: the maker winds on, and the next look is ahead.
		while (cues.nextLook !== null && turns > cues.nextLook + lookPassedAfterTurns) {
			plan.cue.lookDone = cues.nextLook;
			cues = cuesAt(plan.cue, turns, true);
		}
		if (this.reached('ease', turns, cues.easeAt)) this.raise('ease', nowMs);
		if (cues.cue === 'look' && cues.nextLook !== null && fired.look !== cues.nextLook) {
			fired.look = cues.nextLook;
			this.raise('look', nowMs);
		}
		if (plan.cue.lookDone > 0 && turns < plan.cue.lookDone - plan.cue.stopEarlyTurns - rearmTurns) {
			plan.cue.lookDone = lookBehind(plan.cue, turns);
			fired.look = 0;
		}
		if (this.reached('at', turns, plan.cue.target)) this.raise('at', nowMs);
		if (this.reached('over', turns, plan.cue.target + 1)) this.raise('over', nowMs);
	}

	private reached(mark: 'ease' | 'at' | 'over', turns: number, at: number): boolean {
		const fired = this.now.fired;
		if (turns < at) {
			if (turns <= at - rearmTurns) fired[mark] = false;
			return false;
		}
		if (fired[mark]) return false;
		fired[mark] = true;
		return true;
	}

	/** Standing where a look was called: the look is taken. */
	private dealWithLook(): void {
		const plan = this.now.plan;
		const cues = this.cues;
		if (plan && cues?.cue === 'look' && cues.nextLook !== null) plan.cue.lookDone = cues.nextLook;
	}

	private obey(line: HostLine, nowMs: number): void {
		switch (line.verb) {
			case '?':
				if (this.linked) this.urgent.push(this.birthLine(nowMs));
				return;
			case 'ACK':
				return this.acknowledge(line.b, line.n, line.e);
			case 'SYNC':
				return this.synchronise(line.b, line.e);
			case 'SET':
				return this.once(line.id, line.b, () => this.adopt(line, nowMs), this.now.newestSet);
			case 'STOP':
				return this.stop(line, nowMs);
			case 'HOLD':
				this.heldUntilMs = nowMs + line.ms * this.traits.timeScale;
				return;
			case 'TIME':
				// It stamps nothing with wall time, so it needs none.
				return;
		}
	}

	private acknowledge(b: string, n: number, e: number): void {
		// What another boot was acknowledged frees nothing here; nor does a number this boot never gave.
		if (b !== this.boot || n > this.now.n || e > this.now.e) return;
		if (n > 0 || e > 0) this.now.acknowledgedAny = true;
		const freed = this.now.ring.acknowledge(n, e).filter(isEvent);
		if (freed.length > 0) this.watcher.acknowledged?.(freed.map((kept) => kept.line));
	}

	private synchronise(b: string, e: number): void {
		if (b !== this.boot) return this.answer({ verb: 'NO', b: this.boot, why: 'boot' });
		const wanted = this.now.ring.events.filter((kept) => kept.line.e > e);
		const first = wanted[0]?.line.e ?? this.now.e + 1;
		if (e < this.now.e && first > e + 1) this.answer({ verb: 'NO', b: this.boot, why: 'gone' });
		this.replay = [...wanted, ...this.replay.filter((kept) => !wanted.includes(kept as (typeof wanted)[number]))];
	}

	/** Acts on a command once, however often it comes, and answers each time. */
	private once(id: number, b: string, act: () => 'range' | null, newest: number | null = null): void {
		if (b !== this.boot) return this.answer({ verb: 'NO', b: this.boot, id, why: 'boot' });
		const known = this.now.answers.find((answer) => answer.id === id);
		if (known) {
			if (this.linked) this.urgent.push(known.text);
			return;
		}
		// Numbers grow and may wrap: in the half of them behind the newest lies what was overtaken on the way.
		const behind = newest === null ? 0 : (newest - id) >>> 0;
		if (behind > 0 && behind <= 0x7fff_ffff) return this.answer({ verb: 'NO', b, id, why: 'old' });
		const why = act();
		const answer = why ? ({ verb: 'NO', b, id, why } as const) : ({ verb: 'OK', b, id } as const);
		this.now.answers.push({ id, text: formatLine(answer) });
		if (this.now.answers.length > answersKeptMin) this.now.answers.shift();
		this.answer(answer);
	}

	private adopt(set: SetPlan, nowMs: number): 'range' | null {
		const boot = this.now;
		boot.newestSet = set.id;
		const from = set.from ?? 0;
		const target = Math.abs(set.tgt - from);
		if (target === 0 || target > turnsMax) return 'range';
		const before = boot.plan;
		const sign = set.tgt > from ? 1 : -1;
		const cue: CuePlan = {
			target,
			lookEvery: set.look,
			firstLook: set.fst ?? 0,
			easeEarlyTurns: set.ease,
			stopEarlyTurns: set.stop,
			lookDone: 0
		};
		boot.plan = { set, from, sign, cue };
		const sameCoil = before?.from === from && before.sign === sign;
		cue.lookDone = sameCoil ? before.cue.lookDone : lookBehind(cue, this.turns!);
		// The same coil told again calls nothing twice; a moved target does.
		if (!sameCoil || before.cue.target !== target) boot.fired = { ease: false, at: false, over: false, look: 0 };
		this.watcher.plan?.(boot.plan);
		// A target moved below the count is over at once.
		this.callOut(nowMs);
		return null;
	}

	private stop(line: StopAsk, nowMs: number): void {
		const act = () => {
			// The output stays open as long as a stop could be meant.
			this.stopUntilMs = nowMs + stopVoidMs;
			return null;
		};
		if (line.id !== undefined) this.once(line.id, line.b ?? this.boot, act);
		else if (line.b === undefined || line.b === this.boot) act();
	}

	private answer(line: { verb: 'OK' | 'NO'; b: string; id?: number; why?: string }): void {
		if (this.linked) this.urgent.push(formatLine(line));
	}
}

/** ` ~`, four digits and LF. */
const checksumBytes = 7;

function bodyChars(line: Hi): number {
	const { verb, ...values } = line;
	return Object.entries(values).reduce(
		(chars, [key, value]) => chars + 2 + key.length + `${value}`.length,
		verb.length
	);
}

/** The last mark at or below a count. */
function lookBehind(plan: CuePlan, turns: number): number {
	const first = plan.firstLook > 0 && plan.firstLook <= turns ? plan.firstLook : 0;
	const every = plan.lookEvery > 0 ? Math.floor(Math.max(0, turns) / plan.lookEvery) * plan.lookEvery : 0;
	return Math.max(first, every);
}
