import { z } from 'zod';
import { wholeText } from '../../../lib/format.ts';
import { coilLimits } from '../../../lib/server/db/coils.ts';
import { keptAsTyped, nameField, parseTyped, wholeField, type FormParsed } from '../../../lib/server/typed-form.ts';
import { lengthOf, typedText, typedWhole } from '../../../lib/typed-values.ts';

/** The short form of what to wind: text fields in, a coil or sentences out. Nothing typed is lost on the way. */

/** Looks closer than this stop the hands more than they help. */
export const lookEveryMin = 10;
export const lookEveryDefault = 500;
/** A dozen alike is a day's work and more; a slip on the keyboard ends here. */
export const alikeMax = 12;
const { nameMax, noteMax, target: targetLimits } = coilLimits;
/** On count within this many turns either side, until the coil's own design says so. */
const toleranceTurns = 5;

export type CoilField = 'name' | 'target' | 'lookEvery' | 'direction' | 'topFaces' | 'note' | 'alike';
export type CoilTyped = Record<CoilField, string>;

export const emptyCoil: CoilTyped = {
	name: '',
	target: '',
	lookEvery: String(lookEveryDefault),
	direction: 'counter-clockwise',
	topFaces: 'out',
	note: '',
	alike: '1'
};

const turnWords = ['turns', 'turn'];

const coilSchema = z
	.object({
		name: nameField(nameMax),
		target: wholeField('Target', ' turns', turnWords, targetLimits),
		lookEvery: z.string().transform((typed, context) => {
			const value = typedWhole(typed, turnWords);
			if (value !== null && (value === 0 || (value >= lookEveryMin && value <= targetLimits.max))) return value;
			context.addIssue({
				code: 'custom',
				message: `Look interval: 0 for none, or ${lookEveryMin} turns up to the target; ${keptAsTyped(typed)}`
			});
			return z.NEVER;
		}),
		direction: z.enum(['counter-clockwise', 'clockwise'], {
			error: 'Direction: counter-clockwise ↺ or clockwise ↻; choose one.'
		}),
		topFaces: z.enum(['out', 'in'], { error: 'Top faces: out or in; choose one.' }),
		note: z.string().transform((typed, context) => {
			const note = typedText(typed);
			if (lengthOf(note) <= noteMax) return note;
			context.addIssue({
				code: 'custom',
				message: `Note: up to ${noteMax} characters; ${wholeText(lengthOf(note))} were kept as typed.`
			});
			return z.NEVER;
		}),
		alike: wholeField('How many alike', '', ['coils', 'coil'], { min: 1, max: alikeMax })
	})
	.superRefine((coil, context) => {
		if (coil.lookEvery > coil.target) {
			context.addIssue({
				code: 'custom',
				path: ['lookEvery'],
				message: `Look interval: 0 for none, or ${lookEveryMin} to ${wholeText(coil.target)} turns, no more than the target; “${wholeText(coil.lookEvery)}” was kept as typed.`
			});
		}
	})
	.transform(({ alike, ...coil }) => ({ coil: { ...coil, toleranceTurns }, alike }));

export type CoilParsed = FormParsed<CoilField, z.output<typeof coilSchema>>;

/** A field that the form does not hold is blank, but one coil is meant without `alike` (editing it). */
const absent: CoilTyped = {
	name: '',
	target: '',
	lookEvery: '',
	direction: '',
	topFaces: '',
	note: '',
	alike: emptyCoil.alike
};

export function parseCoilForm(form: FormData): CoilParsed {
	return parseTyped(form, absent, coilSchema);
}
