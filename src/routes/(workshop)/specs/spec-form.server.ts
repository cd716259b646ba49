import { predictSpec } from '../../../lib/spec/model.ts';
import { textMax, type SpecContent } from '../../../lib/spec/content.ts';
import {
	fillChosen,
	readSpec,
	refusalErrors,
	specFields,
	writeSpec,
	type SpecErrors,
	type SpecTyped
} from '../../../lib/spec/form.ts';
import { unitPreference, type UnitPreference } from '../../../lib/coil/units.ts';
import { wholeText } from '../../../lib/format.ts';
import { lengthOf, typedText } from '../../../lib/typed-values.ts';

/** The form of a spec as it is posted. */

export type SpecPosted =
	| { ok: true; content: SpecContent; typed: SpecTyped; why: string }
	| { ok: false; typed: SpecTyped; errors: SpecErrors; why: string; whyError: string | null };

/**
 * @param units of the person; the form says in which it was written, should they have changed since
 * @param base what the fields were written from
 */
export function readPosted(form: FormData, units: UnitPreference, base: SpecContent): SpecPosted {
	const text = (name: string): string | null => {
		const value = form.get(name);
		return typeof value === 'string' ? value : null;
	};
	const written = unitsOf(text('units')) ?? units;
	const before = writeSpec(base, written);
	let typed = { ...before };
	for (const field of specFields) typed[field] = text(field) ?? before[field];
	if (text('scripted') !== 'yes') typed = fillChosen(typed, written, base);

	const why = text('why') ?? '';
	const reason = typedText(why);
	const whyError =
		lengthOf(reason) > textMax.why
			? `What changed, and why: up to ${textMax.why} characters; ${wholeText(lengthOf(reason))} were kept as typed.`
			: null;
	const read = readSpec(typed, written, base);
	const predicted = read.ok ? predictSpec(read.content) : null;
	const errors = read.ok ? (predicted?.ok ? {} : refusalErrors(predicted!, written)) : read.errors;
	if (!read.ok || Object.keys(errors).length > 0 || whyError) return { ok: false, typed, errors, why, whyError };
	return { ok: true, content: read.content, typed, why: reason };
}

function unitsOf(text: string | null): UnitPreference | null {
	if (text === null) return null;
	try {
		return unitPreference.parse(JSON.parse(text));
	} catch {
		return null;
	}
}
