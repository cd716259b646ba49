import { z } from 'zod';
import { ohmPerM } from '../../../lib/coil/wire.ts';
import type { UnitPreference } from '../../../lib/coil/units.ts';
import { wholeText } from '../../../lib/format.ts';
import { spoolLimits, type Spool, type SpoolInput } from '../../../lib/server/db/spools.ts';
import { nameField, parseTyped } from '../../../lib/server/typed-form.ts';
import type { SpecWire } from '../../../lib/spec/content.ts';
import { tableWire } from '../../../lib/spec/start.ts';
import {
	fillChosenWire,
	readWire,
	wireFields,
	wireLabels,
	wireMeasures,
	writeWire,
	type WireField
} from '../../../lib/spec/wire-form.ts';
import { keptAsTyped, lengthOf, typedLine, typedText } from '../../../lib/typed-values.ts';

/** A spool as it is typed: text fields in, a spool or sentences out. Nothing typed is lost on the way. */

export type SpoolField = 'name' | 'lot' | 'note' | WireField;
export type SpoolTyped = Record<SpoolField, string>;

/** What a new spool is taken to carry until somebody says otherwise. */
const newWire = tableWire('awg-42', 'single');

const blank = Object.fromEntries(['name', 'lot', 'note', ...wireFields].map((field) => [field, ''])) as SpoolTyped;

export const newSpool = (units: UnitPreference): SpoolTyped => ({ ...blank, ...writeWire(newWire, units) });

export const typedSpool = ({ name, lot, note, wire }: Spool, units: UnitPreference): SpoolTyped => ({
	name,
	lot,
	note,
	...writeWire(wire, units)
});

/** A wire measured further than this from what its diameter says was measured or typed wrong: the diameter varies by less. */
const measuredMin = 0.7;
const measuredMax = 1.4;

const field = (label: string, tidy: (typed: string) => string, charactersMax: number) =>
	z.string().transform((typed, context) => {
		const text = tidy(typed);
		if (lengthOf(text) <= charactersMax) return text;
		context.addIssue({
			code: 'custom',
			message: `${label}: up to ${wholeText(charactersMax)} characters; ${wholeText(lengthOf(text))} were kept as typed.`
		});
		return z.NEVER;
	});

const words = z.object({
	name: nameField(spoolLimits.nameMax),
	lot: field('Lot', typedLine, spoolLimits.lotMax),
	note: field('Note', typedText, spoolLimits.noteMax)
});

export type SpoolErrors = Partial<Record<SpoolField, string>>;
/** `typed` goes back into the form. */
export type SpoolParsed = { typed: SpoolTyped } & (
	{ ok: true; value: SpoolInput } | { ok: false; errors: SpoolErrors }
);

/**
 * @param base the wire the fields were written from; null: those of a new spool
 */
export function parseSpoolForm(form: FormData, units: UnitPreference, base: SpecWire | null): SpoolParsed {
	const typed = { ...blank };
	for (const name of Object.keys(blank) as SpoolField[]) {
		const value = form.get(name);
		if (typeof value === 'string') typed[name] = value;
	}
	const from = base ?? newWire;
	Object.assign(typed, fillChosenWire(pick(typed), units, from));
	const read = readWire(pick(typed), units, from);
	const said = parseTyped(form, { name: '', lot: '', note: '' }, words);
	const errors: SpoolErrors = {
		...(said.ok ? {} : said.errors),
		...(read.ok ? measuredRefused(read.wire, typed.wireOhmPerM, units) : read.errors)
	};
	if (said.ok && read.ok && Object.keys(errors).length === 0) {
		return { ok: true, typed, value: { ...said.value, wire: read.wire } };
	}
	return { ok: false, typed, errors };
}

const pick = (typed: SpoolTyped) =>
	Object.fromEntries(wireFields.map((name) => [name, typed[name]])) as Record<WireField, string>;

function measuredRefused(wire: SpecWire, typed: string, units: UnitPreference): { wireOhmPerM?: string } {
	if (wire.ohmPerM === null) return {};
	const bySize = ohmPerM(wire.diameterM);
	if (wire.ohmPerM >= measuredMin * bySize && wire.ohmPerM <= measuredMax * bySize) return {};
	const { tell } = wireMeasures(units).wireOhmPerM;
	return {
		wireOhmPerM: `${wireLabels.wireOhmPerM}: ${tell(measuredMin * bySize, 3)} to ${tell(measuredMax * bySize, 3)} for a wire of this diameter; ${keptAsTyped(typed)}`
	};
}
