import { z } from 'zod';
import { wholeText } from '../../../../lib/format.ts';
import { keptAsTyped, nameField, parseTyped, wholeField, type FormParsed } from '../../../../lib/server/typed-form.ts';
import { typedWhole } from '../../../../lib/typed-values.ts';
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

const turnWords = ['turns', 'turn'];
const { nameMax, keepAfterS: keepLimits } = winderLimits;

const winderSchema = z
	.object({
		name: nameField(nameMax),
		pulsesPerTurn: wholeField('Pulses per turn', '', ['pulses', 'pulse'], winderLimits.pulsesPerTurn),
		rpmMax: wholeField('Highest speed', ' rpm', ['rpm'], winderLimits.rpmMax),
		seesDirection: z
			.enum(['yes', 'no'], { error: 'Sees direction: yes or no; choose one.' })
			.transform((answer) => answer === 'yes'),
		forwardIs: z.enum(['counter-clockwise', 'clockwise'], {
			error: 'Turning forward: counter-clockwise ↺ or clockwise ↻; choose one.'
		}),
		easeEarlyTurns: wholeField('Ease off early by', ' turns', turnWords, winderLimits.easeEarlyTurns),
		stopEarlyTurns: wholeField('Stop early by', ' turns', turnWords, winderLimits.stopEarlyTurns),
		keepAfterS: z.string().transform((typed, context) => {
			if (typed.trim() === '' || typed.trim().toLowerCase() === 'never') return null;
			const value = typedWhole(typed, ['seconds', 'second', 's']);
			if (value !== null && value >= keepLimits.min && value <= keepLimits.max) return value;
			context.addIssue({
				code: 'custom',
				message: `Keep by itself after: ${keepLimits.min} to ${keepLimits.max} seconds, or empty for never; ${keptAsTyped(typed)}`
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

export type WinderParsed = FormParsed<WinderField, WinderForm>;

/** A field that the form does not hold is blank, whatever a new winder would begin with. */
const absent = Object.fromEntries(Object.keys(newWinderTyped).map((field) => [field, ''])) as WinderTyped;

export function parseWinderForm(form: FormData): WinderParsed {
	return parseTyped(form, absent, winderSchema);
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
