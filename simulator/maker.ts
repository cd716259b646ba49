import type { Cue } from '../src/lib/winding/types.ts';
import type { CuesNow } from '../src/lib/winding/cues.ts';
import { handsOff, type Drive } from './physics.ts';
import { between, type Random } from './random.ts';

/**
 * The person at the winder: a foot on the pedal, two hands, eyes on the lamps and the count, and a delay between seeing and
 * doing. Pure: time is an argument. Taps on the bench are not this maker's business; whoever watches the bench taps.
 */

/** A pair of bounds to draw from. */
export type Span = readonly [least: number, most: number];

export interface MakerTraits {
	/** Seeing a cue to moving the foot. */
	reactionMs: Span;
	/** Looking how the wire lies. */
	lookMs: Span;
	/** From the plan to the first turn: fitting bobbin and wire. The first coil's bobbin is on already. */
	firstStartMs: Span;
	startMs: Span;
	/** Share of the top speed wound at. */
	cruise: number;
	/** Chance that at a look a few turns are taken back and wound again. Never with one sensor. */
	takeBackChance: number;
	/** Chance that the spindle is rocked a little at a look. Never with one sensor. */
	rockChance: number;
	/** Until a wire that left the bobbin is noticed, and to splice it. */
	snapNoticeMs: Span;
	spliceMs: Span;
	/** Until a count that stands still at speed is noticed, and to fit the magnet again. */
	counterNoticeMs: Span;
	refitMs: Span;
}

export const calmMaker: MakerTraits = {
	reactionMs: [350, 900],
	lookMs: [3500, 7000],
	firstStartMs: [4000, 6000],
	startMs: [12_000, 16_000],
	cruise: 0.85,
	takeBackChance: 0,
	rockChance: 0.2,
	snapNoticeMs: [800, 2000],
	spliceMs: [15_000, 25_000],
	counterNoticeMs: [1500, 3000],
	refitMs: [8000, 12_000]
};

/** Left at the target with a hand on the spindle, not worth another touch. */
export const onTargetTurns = 2;

/** What the maker can see and feel at a moment. */
export interface Sight {
	/** Tells one plan from another; null: the display is dark or there is nothing to wind. */
	planKey: string | null;
	sign: 1 | -1;
	cues: CuesNow | null;
	/** Whether the winder's display says that it turns. */
	displayTurning: boolean;
	/** The spindle itself, as the eye sees it. */
	spindleTurning: boolean;
	spindleTurns: number;
	wireOn: boolean;
	seesDirection: boolean;
}

export type Phase =
	| 'waiting'
	| 'preparing'
	| 'winding'
	| 'easing'
	| 'stopping'
	| 'looking'
	| 'taking-back'
	| 'touching-up'
	| 'splicing'
	| 'refitting';

/** What the maker did that is no drive of the spindle. */
export type Act = 'start' | 'look' | 'take-back' | 'splice' | 'refit' | 'reached';

type StopReason = 'look' | 'target' | 'dark' | 'snap' | 'counter';

/** Pedal shares. A look is stopped for from a middling speed, the target is crept up to. */
const pedals = { look: 0.35, ease: 0.22, creep: 0.1 };
/** Without a cue of the winder a careful maker eases off this many turns before the end, and creeps these last ones. */
const easeAnywayTurns = 15;
const creepTurns = 10;
const handRpm = 35;
/** Turning by hand towards a count that does not move is given up after this. */
const touchUpMsMax = 20_000;
const rockTurns = 0.03;

export class Maker {
	phase: Phase = 'waiting';
	/** Enough for today: no further coil is begun. */
	resting = false;
	private untilMs = 0;
	private reason: StopReason = 'target';
	private coilsStarted = 0;
	/** The coil being wound has turned and is not finished. */
	private open = false;
	private seenCue: Cue | null = null;
	private cue: Cue | null = null;
	private coming: { atMs: number; cue: Cue | null }[] = [];
	private noticedMs: { snap: number | null; counter: number | null; dark: number | null } = {
		snap: null,
		counter: null,
		dark: null
	};
	private markTurns = 0;
	private rocking = false;
	/** At this look turns have been taken back. */
	private tookBack = false;
	private acts: Act[] = [];

	constructor(
		readonly traits: MakerTraits,
		private readonly random: Random
	) {}

	/** What hands and foot do now. Call at every step of the spindle. */
	step(nowMs: number, sight: Sight): Drive {
		this.perceive(nowMs, sight);
		switch (this.phase) {
			case 'waiting':
				if (this.wanted(sight)) {
					const span = this.coilsStarted === 0 ? this.traits.firstStartMs : this.traits.startMs;
					this.go('preparing', nowMs, this.open ? this.traits.lookMs : span);
				}
				return handsOff;
			case 'preparing':
				if (!this.wanted(sight)) this.phase = 'waiting';
				else if (nowMs >= this.untilMs) this.begin();
				return handsOff;
			case 'winding':
			case 'easing':
				return this.underWay(nowMs, sight);
			case 'stopping':
				if (!sight.spindleTurning) this.stood(nowMs, sight);
				return handsOff;
			case 'looking':
				return this.looking(nowMs, sight);
			case 'taking-back':
				return this.takingBack(nowMs, sight);
			case 'touching-up':
				return this.touchingUp(nowMs, sight);
			case 'splicing':
			case 'refitting':
				if (nowMs >= this.untilMs) {
					this.acts.push(this.phase === 'splicing' ? 'splice' : 'refit');
					this.phase = 'waiting';
				}
				return handsOff;
		}
	}

	/** The acts since the last call, in order. */
	takeActs(): Act[] {
		const acts = this.acts;
		this.acts = [];
		return acts;
	}

	/** Somebody says go on: a look, or the preparing of a coil, ends at once. */
	goOn(): void {
		if (this.phase === 'looking' || this.phase === 'preparing') this.untilMs = 0;
	}

	private draw(span: Span): number {
		return between(this.random, span[0], span[1]);
	}

	private go(phase: Phase, nowMs: number, span: Span): void {
		this.phase = phase;
		this.untilMs = nowMs + this.draw(span);
	}

	/** A cue reaches the hands a reaction later; one that is gone again by then was still seen. */
	private perceive(nowMs: number, sight: Sight): void {
		const cue = sight.cues?.cue ?? null;
		if (cue !== this.seenCue) {
			this.seenCue = cue;
			const before = this.coming[this.coming.length - 1]?.atMs ?? 0;
			this.coming.push({ atMs: Math.max(before, nowMs + this.draw(this.traits.reactionMs)), cue });
		}
		while (this.coming[0] && this.coming[0].atMs <= nowMs) this.cue = this.coming.shift()!.cue;
	}

	/** There is something to wind, and the one before is done. */
	private wanted(sight: Sight): boolean {
		if (this.resting && !this.open) return false;
		return sight.planKey !== null && sight.cues !== null && sight.cues.left > onTargetTurns;
	}

	private begin(): void {
		this.phase = 'winding';
		if (!this.open) {
			this.coilsStarted++;
			this.open = true;
			this.acts.push('start');
		}
	}

	private underWay(nowMs: number, sight: Sight): Drive {
		if (this.notices(nowMs, sight)) {
			this.phase = 'stopping';
			return handsOff;
		}
		const left = sight.cues?.left ?? Infinity;
		if (this.cue === 'ease' || left <= easeAnywayTurns) this.phase = 'easing';
		let pedal = this.cue === 'look-coming' ? pedals.look : this.traits.cruise;
		if (this.phase === 'easing') pedal = left <= creepTurns ? pedals.creep : pedals.ease;
		return { pedal, direction: sight.sign, handRpm: null };
	}

	/** Whether something says stop, and what. */
	private notices(nowMs: number, sight: Sight): boolean {
		const trouble = (kind: 'snap' | 'counter' | 'dark', seen: boolean, span: Span) => {
			if (!seen) this.noticedMs[kind] = null;
			else this.noticedMs[kind] ??= nowMs + this.draw(span);
			if (!seen || nowMs < this.noticedMs[kind]!) return false;
			this.reason = kind;
			return true;
		};
		if (trouble('snap', !sight.wireOn, this.traits.snapNoticeMs)) return true;
		if (trouble('dark', sight.planKey === null, this.traits.reactionMs)) return true;
		const still = sight.planKey !== null && sight.spindleTurning && !sight.displayTurning && this.wasCounting(sight);
		if (trouble('counter', still, this.traits.counterNoticeMs)) return true;
		if (this.cue === 'stop' || this.cue === 'over' || (sight.cues !== null && sight.cues.left <= 0)) {
			this.reason = 'target';
			return true;
		}
		if (this.cue === 'look') {
			this.reason = 'look';
			return true;
		}
		return false;
	}

	/** At the very start the display has not begun to turn either. */
	private wasCounting(sight: Sight): boolean {
		if (sight.displayTurning || !sight.spindleTurning) this.markTurns = sight.spindleTurns;
		return Math.abs(sight.spindleTurns - this.markTurns) > 3;
	}

	private stood(nowMs: number, sight: Sight): void {
		this.markTurns = sight.spindleTurns;
		this.noticedMs = { snap: null, counter: null, dark: null };
		if (this.reason === 'look') {
			this.acts.push('look');
			this.tookBack = false;
			this.rocking = sight.seesDirection && this.random() < this.traits.rockChance;
			this.go('looking', nowMs, this.traits.lookMs);
		} else if (this.reason === 'snap') this.go('splicing', nowMs, this.traits.spliceMs);
		else if (this.reason === 'counter') this.go('refitting', nowMs, this.traits.refitMs);
		else if (this.reason === 'dark') this.phase = 'waiting';
		else this.atTarget(nowMs, sight);
	}

	private looking(nowMs: number, sight: Sight): Drive {
		// The winder calls the look until it has seen the spindle stand.
		if (nowMs >= this.untilMs && sight.cues?.cue !== 'look' && !sight.displayTurning) {
			if (sight.seesDirection && !this.tookBack && this.random() < this.traits.takeBackChance) {
				this.tookBack = true;
				this.acts.push('take-back');
				this.markTurns = sight.spindleTurns;
				this.untilMs = between(this.random, 2, 6);
				this.phase = 'taking-back';
			} else this.resume(sight);
			return handsOff;
		}
		if (!this.rocking) return handsOff;
		const omega = (2 * Math.PI) / 1000;
		return { ...handsOff, handRpm: rockTurns * omega * 60_000 * Math.cos(omega * (this.untilMs - nowMs)) };
	}

	/** While taking back, `untilMs` holds the turns to take. */
	private takingBack(nowMs: number, sight: Sight): Drive {
		if (Math.abs(sight.spindleTurns - this.markTurns) >= this.untilMs) {
			this.go('looking', nowMs, [1500, 2500]);
			this.rocking = false;
			return handsOff;
		}
		return { ...handsOff, handRpm: -handRpm * sight.sign };
	}

	private resume(sight: Sight): void {
		this.cue = this.seenCue;
		this.coming = [];
		if (sight.planKey === null) this.phase = 'waiting';
		else this.begin();
	}

	private atTarget(nowMs: number, sight: Sight): void {
		const left = sight.cues?.left ?? 0;
		// A turn short or over is well within what any coil allows: not everybody touches it up.
		const bothers = Math.abs(left) > 1 || this.random() < 0.5;
		const can = left > 0 || sight.seesDirection;
		if (left !== 0 && bothers && can) {
			this.phase = 'touching-up';
			this.untilMs = nowMs + touchUpMsMax;
		} else this.finish(sight);
	}

	private touchingUp(nowMs: number, sight: Sight): Drive {
		const left = sight.cues?.left ?? 0;
		if (left === 0 || nowMs >= this.untilMs || (left < 0 && !sight.seesDirection)) {
			this.finish(sight);
			return handsOff;
		}
		return { ...handsOff, handRpm: handRpm * Math.sign(left) * sight.sign };
	}

	private finish(sight: Sight): void {
		this.phase = 'waiting';
		this.cue = null;
		const left = sight.cues?.left ?? Infinity;
		if (Math.abs(left) > onTargetTurns && left > 0) return;
		this.open = false;
		this.acts.push('reached');
	}
}
