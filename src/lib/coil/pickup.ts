import type { Direction } from '../winding/types.ts';

/** How the coils of a pickup are joined. SI. */
export type Connection = 'series' | 'parallel' | 'single';

/** Resistance of coils joined; `single` is the first alone. */
export function joinedOhm(ohms: readonly number[], connection: Connection): number {
	if (connection === 'single' || ohms.length < 2) return ohms[0] ?? 0;
	if (connection === 'series') return ohms.reduce((sum, ohm) => sum + ohm, 0);
	return 1 / ohms.reduce((sum, ohm) => sum + 1 / ohm, 0);
}

/**
 * Inductance of two coils joined so that their signals add. In a pickup whose coils face poles of opposite polarity and
 * are wired for the strings, a field common to both runs through them in opposite senses, so the mutual part is taken
 * with the sign given.
 *
 * @param mutualH between the coils as wired: positive when their fluxes aid
 */
export function joinedHenry(henries: readonly number[], connection: Connection, mutualH = 0): number {
	const [first = 0, second] = henries;
	if (connection === 'single' || second === undefined) return first;
	if (connection === 'series') return first + second + 2 * mutualH;
	const denominator = first + second - 2 * mutualH;
	return (first * second - mutualH ** 2) / denominator;
}

export type Pole = 'north-up' | 'south-up';

/** One coil as it sits and is wired: which way the wire goes on seen from the top, the pole that faces up, and the lead that is hot. */
export interface CoilSide {
	direction: Direction;
	pole: Pole;
	hot: 'start' | 'finish';
}

/**
 * What two coils do together. A string's signal has the sign of pole × sense of the wire; hum has the sense of the wire
 * alone. In phase when the string's signals add; hum-cancelling when the hum of the two is opposite.
 */
export function together(a: CoilSide, b: CoilSide): { humCancelling: boolean; inPhase: boolean } {
	const sense = (side: CoilSide) => (side.direction === 'clockwise' ? 1 : -1) * (side.hot === 'finish' ? 1 : -1);
	const pole = (side: CoilSide) => (side.pole === 'north-up' ? 1 : -1);
	return {
		humCancelling: sense(a) !== sense(b),
		inPhase: sense(a) * pole(a) === sense(b) * pole(b)
	};
}
