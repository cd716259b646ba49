import type { LinkState } from './types.ts';

/** While turning a winder sends ten lines a second, standing one a second; these ages leave room for a slow network. */
export const oldAfterMs = { turning: 1_500, standing: 2_500 };
export const noSignalAfterMs = { turning: 3_000, standing: 5_000 };

/**
 * How far the last line can be trusted to be now.
 *
 * @param ageMs age of the last line in wall milliseconds, null when none ever came
 */
export function linkStateOf(ageMs: number | null, turning: boolean): LinkState {
	if (ageMs === null) return 'never';
	const pace = turning ? 'turning' : 'standing';
	if (ageMs >= noSignalAfterMs[pace]) return 'no-signal';
	return ageMs >= oldAfterMs[pace] ? 'old' : 'live';
}
