/** Keys of a pedal, and of a keyboard beside the winder. */
export const pedalKeys = new Set([' ', 'Enter', 'PageDown']);

/** Two presses closer than this are one foot or one finger that trembles. */
export const debounceMs = 250;
/** Held this long, a press is the other meaning. */
export const heldMs = 800;

export type Press = 'pressed' | 'held' | null;

/** What a key going down and up means. Acts when it is let go; a key that repeats is down once. */
export class Pedal {
	#downAt: number | null = null;
	#key: string | null = null;
	#lastAt = -Infinity;

	down(key: string, repeat: boolean, nowMs: number): void {
		if (repeat || this.#key !== null || !pedalKeys.has(key)) return;
		this.#key = key;
		this.#downAt = nowMs;
	}

	up(key: string, nowMs: number): Press {
		if (this.#key !== key || this.#downAt === null) return null;
		const heldForMs = nowMs - this.#downAt;
		this.cancel();
		if (!this.allows(nowMs)) return null;
		return heldForMs >= heldMs ? 'held' : 'pressed';
	}

	/** The window lost the keyboard: the key may be let go unseen. */
	cancel(): void {
		this.#key = this.#downAt = null;
	}

	/** Whether enough time has passed since the last press or touch; if so this one counts as the last. */
	allows(nowMs: number): boolean {
		if (nowMs - this.#lastAt < debounceMs) return false;
		this.#lastAt = nowMs;
		return true;
	}
}
