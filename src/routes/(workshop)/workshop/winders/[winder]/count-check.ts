import { turnsText, wholeText } from '../../../../../lib/format.ts';

/** The hand test: the spindle is turned exactly this many times, slowly, and the count says what the winder made of it. */
export const handTurns = 10;

/** Totals of a boot, as the live state gives them. */
export interface Totals {
	boot: string | null;
	forward: number;
	reverse: number;
}

export interface CountSince {
	forward: number;
	reverse: number;
}

/** Turns counted since the start of the check; null when the winder restarted in between and the check begins anew. */
export function countSince(start: Totals, now: Totals): CountSince | null {
	if (start.boot === null || start.boot !== now.boot) return null;
	return { forward: now.forward - start.forward, reverse: now.reverse - start.reverse };
}

export interface Verdict {
	kind: 'right' | 'nothing' | 'multiple' | 'half' | 'both-ways' | 'other';
	/** What came out, in one sentence. */
	says: string;
	/** What to change, in plain sentences. */
	todo: string;
}

/**
 * What ten turns by hand say about the counter.
 *
 * @param pulsesPerTurn as set for this winder, to name the number to change it to
 */
export function verdictOf(since: CountSince, pulsesPerTurn: number, seesDirection: boolean): Verdict {
	const counted = Math.max(since.forward, since.reverse);
	const other = Math.min(since.forward, since.reverse);
	const says = `${turnsText(since.forward + since.reverse)} counted for ${handTurns} by hand.`;
	const way =
		seesDirection && since.reverse > since.forward
			? ' They came as reverse turns: if you turned it the way it winds, swap the two sensor wires or change which way the wire goes on.'
			: '';
	if (counted === 0) {
		return {
			kind: 'nothing',
			says: 'Nothing counted.',
			todo: 'Check the sensor’s supply and its distance from the magnet or disc, and that this page says the link is live.'
		};
	}
	if (other > 0) {
		return {
			kind: 'both-ways',
			says: `${wholeText(since.forward)} forward and ${wholeText(since.reverse)} reverse turns counted for ${handTurns} by hand.`,
			todo: 'Turn it one way only, without rocking back. If you did, the two sensors stand too close together or one of them misses pulses.'
		};
	}
	if (counted === handTurns) {
		return { kind: 'right', says, todo: `The count is right.${way}` };
	}
	if (counted % handTurns === 0 && counted / handTurns <= 8) {
		const times = counted / handTurns;
		const name = times === 2 ? 'twice' : `${times} times`;
		return {
			kind: 'multiple',
			says: `${says} That is ${name} as many.`,
			todo: `The sensor gives ${pulsesPerTurn * times} pulses a turn where ${pulsesPerTurn} ${pulsesPerTurn === 1 ? 'is' : 'are'} set: set pulses per turn to ${pulsesPerTurn * times} in the counter’s own settings and here. Or take ${times === 2 ? 'one of the two magnets' : 'magnets'} off until one is left.${way}`
		};
	}
	if (counted * 2 === handTurns) {
		const fits = pulsesPerTurn % 2 === 0;
		return {
			kind: 'half',
			says: `${says} That is half as many.`,
			todo: fits
				? `Set pulses per turn to ${pulsesPerTurn / 2} in the counter’s own settings and here.${way}`
				: `Every second pulse is missed: bring the sensor nearer to the magnet, and check that its signal falls fully between two pulses.${way}`
		};
	}
	return {
		kind: 'other',
		says,
		todo: `Turn slowly and exactly ${handTurns} times, then try again. Too many: the sensor bounces, look at its cable and its distance. Too few: it misses pulses, bring it nearer.${way}`
	};
}
