import { z } from 'zod';
import { wholeText } from '../format.ts';
import { keptAsTyped, lengthOf, typedLine, typedWhole } from '../typed-values.ts';

export { keptAsTyped };

/** Forms of text fields: values or sentences out. Nothing typed is lost on the way. */

/**
 * A whole number between two bounds, typed generously.
 *
 * @param unit as it follows the bounds in the refusal, such as ` turns`, or empty
 * @param words that may follow the number, such as `['turns', 'turn']`
 */
export function wholeField(label: string, unit: string, words: string[], { min, max }: { min: number; max: number }) {
	return z.string().transform((typed, context) => {
		const value = typedWhole(typed, words);
		if (value !== null && value >= min && value <= max) return value;
		context.addIssue({
			code: 'custom',
			message: `${label}: ${wholeText(min)} to ${wholeText(max)}${unit}; ${keptAsTyped(typed)}`
		});
		return z.NEVER;
	});
}

/** A name on one line, of one character at least. */
export function nameField(charactersMax: number) {
	return z.string().transform((typed, context) => {
		const name = typedLine(typed);
		if (lengthOf(name) >= 1 && lengthOf(name) <= charactersMax) return name;
		context.addIssue({
			code: 'custom',
			message: `Name: 1 to ${charactersMax} characters; ${name === '' ? 'nothing was typed.' : `${lengthOf(name)} were kept as typed.`}`
		});
		return z.NEVER;
	});
}

export type FormParsed<Field extends string, Value> =
	{ ok: true; value: Value } | { ok: false; typed: Record<Field, string>; errors: Partial<Record<Field, string>> };

/**
 * The fields of a form through their schema, with the first sentence of each field at fault.
 *
 * @param blank every field, with what an absent one is taken for
 */
export function parseTyped<Field extends string, Schema extends z.ZodType>(
	form: FormData,
	blank: Readonly<Record<Field, string>>,
	schema: Schema
): FormParsed<Field, z.output<Schema>> {
	const typed: Record<Field, string> = { ...blank };
	for (const field of Object.keys(blank) as Field[]) {
		const value = form.get(field);
		if (typeof value === 'string') typed[field] = value;
	}
	const parsed = schema.safeParse(typed);
	if (parsed.success) return { ok: true, value: parsed.data };
	const errors: Partial<Record<Field, string>> = {};
	for (const issue of parsed.error.issues) errors[issue.path[0] as Field] ??= issue.message;
	return { ok: false, typed, errors };
}
