import { addLine, copyBoot, type BootState } from './boot.ts';
import type { WinderState } from './state.ts';

/** What is taken in of a boot, small enough to be written with every batch. A jump that waits for a word is not in it. */
export type Cursor = Pick<BootState, 'b' | 'n' | 'e' | 'f' | 'v' | 't'>;

/** A cursor that committed after the state was last written: the greatest totals win. */
export function mergeCursor(state: WinderState, cursor: Cursor): WinderState {
	const known = state.boots.find((boot) => boot.b === cursor.b);
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
		boot.f = Math.max(boot.f, cursor.f);
		boot.v = Math.max(boot.v, cursor.v);
	}
	boot.t = Math.max(boot.t, cursor.t);
	return { ...state, boots: state.boots.map((entry) => (entry === known ? boot : entry)) };
}
