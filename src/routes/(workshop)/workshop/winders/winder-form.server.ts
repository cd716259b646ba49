import { z } from 'zod';
import { wholeText } from '../../../../lib/format.ts';
import { lengthOf, typedLine, typedWhole } from '../../../../lib/typed-values.ts';
import { winderLimits } from '../../../../lib/server/db/winders.ts';

/** The settings of a winder: text fields in, settings or sentences out. Nothing typed is lost on the way. */

export type WinderField =
	| 'name'
	| 'pulsesPerTurn'
	| 'rpmMax'
	| 'seesDirection'
	| 'forwardIs'
	| 'easeEarlyTurns'
	| 'stopEarlyTurns'
	| 'keepAfterS';
export type WinderTyped = Record<WinderField, string>;

export const newWinderTyped: WinderTyped = {
	name: '',
	pulsesPerTurn: '1',
	rpmMax: '2,000',
	seesDirection: 'no',
	forwardIs: 'counter-clockwise',
	easeEarlyTurns: '40',
	stopEarlyTurns: '3',
	keepAfterS: ''
};

function kept(typed: string): string {
	const shown = typed.trim();
	if (shown === '') return 'nothing was typed.';
	return `“${[...shown].slice(0, 40).join('')}${lengthOf(shown) > 40 ? '…' : ''}” was kept as typed.`;
}

function whole(label: string, unit: string, words: string[], { min, max }: { min: number; max: number }) {
	return z.string().transform((typed, context) => {
		const value = typedWhole(typed, words);
		if (value !== null && value >= min && value <= max) return value;
		context.addIssue({
			code: 'custom',
			message: `${label}: ${wholeText(min)} to ${wholeText(max)}${unit}; ${kept(typed)}`
		});
		return z.NEVER;
	});
}

const turnWords = ['turns', 'turn'];
const { nameMax, keepAfterS: keepLimits } = winderLimits;

const winderSchema = z
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
		pulsesPerTurn: whole('Pulses per turn', '', ['pulses', 'pulse'], winderLimits.pulsesPerTurn),
		rpmMax: whole('Highest speed', ' rpm', ['rpm'], winderLimits.rpmMax),
		seesDirection: z
			.enum(['yes', 'no'], { error: 'Sees direction: yes or no; choose one.' })
			.transform((answer) => answer === 'yes'),
		forwardIs: z.enum(['counter-clockwise', 'clockwise'], {
			error: 'Turning forward: counter-clockwise ↺ or clockwise ↻; choose one.'
		}),
		easeEarlyTurns: whole('Ease off early by', ' turns', turnWords, winderLimits.easeEarlyTurns),
		stopEarlyTurns: whole('Stop early by', ' turns', turnWords, winderLimits.stopEarlyTurns),
		keepAfterS: z.string().transform((typed, context) => {
			if (typed.trim() === '' || typed.trim().toLowerCase() === 'never') return null;
			const value = typedWhole(typed, ['seconds', 'second', 's']);
			if (value !== null && value >= keepLimits.min && value <= keepLimits.max) return value;
			context.addIssue({
				code: 'custom',
				message: `Keep by itself after: ${keepLimits.min} to ${keepLimits.max} seconds, or empty for never; ${kept(typed)}`
			});
			return z.NEVER;
		})
	})
	.superRefine((winder, context) => {
		if (winder.stopEarlyTurns > winder.easeEarlyTurns) {
			context.addIssue({
				code: 'custom',
				path: ['stopEarlyTurns'],
				message: `Stop early by: 0 to ${wholeText(winder.easeEarlyTurns)} turns, no more than ease off; “${wholeText(winder.stopEarlyTurns)}” was kept as typed.`
			});
		}
	});

export type WinderForm = z.output<typeof winderSchema>;

export type WinderParsed =
	{ ok: true; value: WinderForm } | { ok: false; typed: WinderTyped; errors: Partial<Record<WinderField, string>> };

export function parseWinderForm(form: FormData): WinderParsed {
	const typed = { ...newWinderTyped };
	for (const field of Object.keys(typed) as WinderField[]) {
		const value = form.get(field);
		typed[field] = typeof value === 'string' ? value : '';
	}
	const parsed = winderSchema.safeParse(typed);
	if (parsed.success) return { ok: true, value: parsed.data };
	const errors: Partial<Record<WinderField, string>> = {};
	for (const issue of parsed.error.issues) errors[issue.path[0] as WinderField] ??= issue.message;
	return { ok: false, typed, errors };
}

/** Settings as the form shows them. */
export function typedOf(settings: WinderForm): WinderTyped {
	return {
		name: settings.name,
		pulsesPerTurn: wholeText(settings.pulsesPerTurn),
		rpmMax: wholeText(settings.rpmMax),
		seesDirection: settings.seesDirection ? 'yes' : 'no',
		forwardIs: settings.forwardIs,
		easeEarlyTurns: wholeText(settings.easeEarlyTurns),
		stopEarlyTurns: wholeText(settings.stopEarlyTurns),
		keepAfterS: settings.keepAfterS === null ? '' : String(settings.keepAfterS)
	};
}
