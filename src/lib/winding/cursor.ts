import { addLine, copyBoot } from './boot.ts';
import type { WinderState } from './state.ts';

/** The cursor of a boot: what of it is taken in, small enough to be written with every batch. */

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
