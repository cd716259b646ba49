import type { SoundNow } from './present.ts';
import {
	countTick,
	easeTick,
	easeTickEveryMs,
	kept,
	lookComing,
	lookNow,
	noSignal,
	noSignalEveryMs,
	overTicks,
	rampMs,
	stop,
	test,
	type Tone
} from './rhythm.ts';

/** Ticks are laid on the audio clock this far ahead, so that a busy page does not make them stumble. */
const aheadMs = 300;
/** A little into the future: a tone that begins in the past loses its ramp. */
const leadMs = 15;

/** What a player begins next; the audio clock and what has sounded are in it, so that it can be followed without a browser. */
export interface PlayerState {
	key: string;
	cue: SoundNow['cue'];
	/** Audio clock ms at which the repeating rhythm of this cue is due next. */
	dueMs: number;
	overHeard: number;
}

export const silent: PlayerState = { key: 'quiet', cue: 'quiet', dueMs: 0, overHeard: 0 };

export interface Step {
	state: PlayerState;
	/** Rhythms to begin, each at a time of the audio clock. */
	begin: { atMs: number; tones: readonly Tone[] }[];
	/** Cut off what sounds: the cue it belonged to is over. */
	cut: boolean;
}

/**
 * From what sounds now to what is to begin until a moment from now. A cue begins once when its key changes; ease and no
 * signal go on while they last; over ticks once for each further turn.
 */
export function nextSounds(state: PlayerState, now: SoundNow, clockMs: number): Step {
	const begin: Step['begin'] = [];
	const at = clockMs + leadMs;
	const changed = now.key !== state.key || now.cue !== state.cue;
	// Stop becomes over without a pause: its steady tone goes on until the spindle stands.
	const goesOn = state.cue === 'stop' && now.cue === 'over';
	const cut = changed && !goesOn;
	const next: PlayerState = changed ? { key: now.key, cue: now.cue, dueMs: at, overHeard: 0 } : { ...state };

	switch (now.cue) {
		case 'quiet':
			break;
		case 'look-coming':
			if (changed) begin.push({ atMs: at, tones: lookComing });
			break;
		case 'look':
			if (changed) begin.push({ atMs: at, tones: lookNow });
			break;
		case 'stop':
			if (changed) begin.push({ atMs: at, tones: stop });
			break;
		case 'over': {
			if (changed && !goesOn) begin.push({ atMs: at, tones: stop });
			const ticks = overTicks(now.over, next.overHeard);
			if (ticks.length > 0) begin.push({ atMs: Math.max(at, next.dueMs), tones: ticks });
			next.overHeard += ticks.length;
			const last = ticks.at(-1);
			if (last) next.dueMs = Math.max(at, next.dueMs) + last.atMs + 2 * last.lengthMs;
			break;
		}
		case 'ease':
			next.dueMs = Math.max(next.dueMs, clockMs);
			for (; next.dueMs < clockMs + aheadMs; next.dueMs += easeTickEveryMs(now.nearness)) {
				begin.push({ atMs: Math.max(at, next.dueMs), tones: easeTick });
			}
			break;
		case 'no-signal':
			if (next.dueMs <= at) {
				begin.push({ atMs: at, tones: noSignal });
				next.dueMs = at + noSignalEveryMs;
			}
			break;
	}
	return { state: next, begin, cut };
}

/** Plays on the audio clock. Made at the first tap: before it browsers allow no sound. */
export class Player {
	#context: AudioContext | null = null;
	#out: GainNode | null = null;
	#sounding = new Set<OscillatorNode>();
	#gains = new Map<OscillatorNode, GainNode>();
	#state = silent;
	volume: number;

	constructor(volume: number) {
		this.volume = volume;
	}

	/** 'none' before the first tap, 'suspended' when the browser has put the sound to sleep. */
	get awake(): 'none' | 'suspended' | 'running' {
		if (!this.#context) return 'none';
		return this.#context.state === 'running' ? 'running' : 'suspended';
	}

	/** To be called within a touch or key press. */
	async wake(): Promise<void> {
		if (!this.#context) {
			this.#context = new AudioContext({ latencyHint: 'interactive' });
			this.#out = this.#context.createGain();
			this.#out.connect(this.#context.destination);
		}
		this.setVolume(this.volume);
		if (this.#context.state !== 'running') await this.#context.resume();
	}

	setVolume(volume: number): void {
		this.volume = volume;
		if (this.#context && this.#out) this.#out.gain.setTargetAtTime(volume, this.#context.currentTime, 0.01);
	}

	playTest(): void {
		this.#playNow(test);
	}
	playKept(): void {
		this.#playNow(kept);
	}
	playCountTick(low: boolean): void {
		this.#playNow(countTick(low));
	}

	/** Brings the sound in step with what the bench shows; called often. */
	follow(now: SoundNow): void {
		if (this.#context?.state !== 'running') {
			// What could not sound is not made up for later.
			this.#state = { ...silent, key: now.key, cue: now.cue, overHeard: now.over };
			return;
		}
		const clockMs = this.#context.currentTime * 1000;
		const { state, begin, cut } = nextSounds(this.#state, now, clockMs);
		this.#state = state;
		if (cut) this.#cut();
		for (const { atMs, tones } of begin) this.#play(tones, atMs);
	}

	async close(): Promise<void> {
		this.#cut();
		await this.#context?.close();
		this.#context = this.#out = null;
	}

	#playNow(tones: readonly Tone[]): void {
		if (this.#context?.state === 'running') this.#play(tones, this.#context.currentTime * 1000 + leadMs);
	}

	#play(tones: readonly Tone[], beginMs: number): void {
		for (const tone of tones) {
			this.#tone(tone, tone.hz, beginMs);
			// A second tone a little higher beats with it: rough to the ear, and no cue besides has it.
			if (tone.rough) this.#tone(tone, tone.hz * 1.06, beginMs);
		}
	}

	#tone(tone: Tone, hz: number, beginMs: number): void {
		const context = this.#context!;
		const start = (beginMs + tone.atMs) / 1000;
		const end = start + tone.lengthMs / 1000;
		const ramp = rampMs / 1000;
		const level = tone.level * (tone.rough ? 0.3 : 0.5);
		const gain = context.createGain();
		gain.gain.setValueAtTime(0, start);
		gain.gain.linearRampToValueAtTime(level, start + ramp);
		gain.gain.setValueAtTime(level, end - ramp);
		gain.gain.linearRampToValueAtTime(0, end);
		const oscillator = context.createOscillator();
		// A triangle carries farther than a sine beside a motor.
		oscillator.type = 'triangle';
		oscillator.frequency.value = hz;
		oscillator.connect(gain).connect(this.#out!);
		oscillator.start(start);
		oscillator.stop(end + 0.01);
		this.#sounding.add(oscillator);
		this.#gains.set(oscillator, gain);
		oscillator.onended = () => {
			gain.disconnect();
			this.#sounding.delete(oscillator);
			this.#gains.delete(oscillator);
		};
	}

	#cut(): void {
		const now = this.#context?.currentTime ?? 0;
		for (const oscillator of this.#sounding) {
			const gain = this.#gains.get(oscillator);
			gain?.gain.cancelScheduledValues(now);
			gain?.gain.setTargetAtTime(0, now, rampMs / 3000);
			oscillator.stop(now + (3 * rampMs) / 1000);
		}
	}
}
