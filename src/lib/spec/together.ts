import { together, type CoilSide } from '../coil/pickup.ts';
import type { SpecContent } from './content.ts';

/** Two coils of one pickup: which of the eight ways they can go together this is, and what would mend it. */

export interface TogetherRow {
	/** Whether the two coils are alike in it. */
	samePole: boolean;
	sameDirection: boolean;
	sameHot: boolean;
	humCancelling: boolean;
	inPhase: boolean;
	/** The way this spec is. */
	own: boolean;
}

const [north, south] = ['north-up', 'south-up'] as const;

/** All eight ways, by the rule that reckons with them too. */
export function togetherTable(content: SpecContent): TogetherRow[] {
	const [a, b] = content.coils;
	const first: CoilSide = { pole: north, direction: 'clockwise', hot: 'start' };
	const rows: TogetherRow[] = [];
	for (const samePole of [false, true])
		for (const sameDirection of [true, false])
			for (const sameHot of [false, true]) {
				const second: CoilSide = {
					pole: samePole ? north : south,
					direction: sameDirection ? 'clockwise' : 'counter-clockwise',
					hot: sameHot ? 'start' : 'finish'
				};
				rows.push({
					samePole,
					sameDirection,
					sameHot,
					...together(first, second),
					own:
						a !== undefined &&
						b !== undefined &&
						(a.pole === b.pole) === samePole &&
						(a.direction === b.direction) === sameDirection &&
						(a.hot === b.hot) === sameHot
				});
			}
	return rows;
}

/**
 * What to change for hum to cancel and the strings' signals to add, in plain words; null where nothing needs to be.
 * Out of phase may be wanted: the sentence says what it does, and leaves the choice.
 */
export function mendWords(row: Pick<TogetherRow, 'humCancelling' | 'inPhase'>): string | null {
	const { humCancelling, inPhase } = row;
	if (humCancelling && inPhase) return null;
	if (!humCancelling && !inPhase)
		return 'Hum adds up and the strings’ signals work against each other. Swap start and finish of one coil: that mends both.';
	if (!humCancelling)
		return 'The strings’ signals add, but so does hum. Swap start and finish of one coil and turn its magnet over, so that its other pole faces the strings: with one of the two alone the coils would be out of phase.';
	return 'Hum cancels, but the strings’ signals work against each other: thin and weak, unless that is wanted. Turn the magnet of one coil over, so that its other pole faces the strings; swapping leads instead would bring the hum back.';
}
