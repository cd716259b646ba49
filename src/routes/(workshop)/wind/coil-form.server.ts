import { z } from 'zod';
import { wholeText } from '../../../lib/format.ts';
import { coilLimits } from '../../../lib/server/db/coils.ts';
import { lengthOf, typedLine, typedText, typedWhole } from '../../../lib/typed-values.ts';

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

/** What to say of a refused value, with the value as it stands in the field. */
function kept(typed: string): string {
	const shown = typed.trim();
	if (shown === '') return 'nothing was typed.';
	return `“${[...shown].slice(0, 40).join('')}${lengthOf(shown) > 40 ? '…' : ''}” was kept as typed.`;
}

/** A whole number between two bounds, typed generously. */
function whole(label: string, unit: string, min: number, max: number) {
	return z.string().transform((typed, context) => {
		const value = typedWhole(typed, turnWords);
		if (value !== null && value >= min && value <= max) return value;
		context.addIssue({
			code: 'custom',
			message: `${label}: ${wholeText(min)} to ${wholeText(max)}${unit}; ${kept(typed)}`
		});
		return z.NEVER;
	});
}

const coilSchema = z
	.object({
		name: z.string().transform((typed, context) => {
			const name = typedLine(typed);
			if (lengthOf(name) >= 1 && lengthOf(name) <= nameMax) return name;
			context.addIssue({
				code: 'custom',
				message: `Name: 1 to ${nameMax} characters; ${name === '' ? 'nothing was typed.' : `${lengthOf(name)} were kept as typed.`}`
			});
			return z.NEVER;
		}),
		target: whole('Target', ' turns', targetLimits.min, targetLimits.max),
		lookEvery: z.string().transform((typed, context) => {
			const value = typedWhole(typed, turnWords);
			if (value !== null && (value === 0 || (value >= lookEveryMin && value <= targetLimits.max))) return value;
			context.addIssue({
				code: 'custom',
				message: `Look interval: 0 for none, or ${lookEveryMin} turns up to the target; ${kept(typed)}`
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
		alike: whole('How many alike', '', 1, alikeMax)
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

export type CoilParsed =
	| { ok: true; value: z.output<typeof coilSchema> }
	| { ok: false; typed: CoilTyped; errors: Partial<Record<CoilField, string>> };

/** Reads the form. `alike` may be absent (editing one coil). */
export function parseCoilForm(form: FormData): CoilParsed {
	const typed = { ...emptyCoil };
	for (const field of Object.keys(typed) as CoilField[]) {
		const value = form.get(field);
		if (typeof value === 'string') typed[field] = value;
		else if (field !== 'alike') typed[field] = '';
	}
	const parsed = coilSchema.safeParse(typed);
	if (parsed.success) return { ok: true, value: parsed.data };
	const errors: Partial<Record<CoilField, string>> = {};
	for (const issue of parsed.error.issues) errors[issue.path[0] as CoilField] ??= issue.message;
	return { ok: false, typed, errors };
}
