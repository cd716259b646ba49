import { shownNumber, shownValue, type UnitPreference } from '../../../../lib/coil/units.ts';
import type { MeterRange } from '../../../../lib/coil/measurement.ts';
import { meterLimits, type MeterInput } from '../../../../lib/server/db/meters.ts';
import { nameField } from '../../../../lib/server/typed-form.ts';
import { measure, readMeasure } from '../../../../lib/spec/measures.ts';
import { keptAsTyped, typedWhole } from '../../../../lib/typed-values.ts';
import { wholeText } from '../../../../lib/format.ts';

/** A meter and its ranges: text fields in, ohms or sentences out. Nothing typed is lost on the way. */

export const rangeFields = ['upTo', 'percent', 'counts', 'digit'] as const;
export type RangeField = (typeof rangeFields)[number];
export type RangeTyped = Record<RangeField, string>;

export interface MeterTyped {
	name: string;
	ranges: RangeTyped[];
}

/** By the name of the field: `name`, `upTo-0`, `percent-0`… */
export type MeterErrors = Record<string, string>;

/** A small digital meter of 2,000 counts. From memory: every meter's own sheet says better. */
const usualRanges: readonly MeterRange[] = [2_000, 20_000, 200_000].map((upToOhm) => ({
	upToOhm,
	percent: 0.8,
	counts: 2,
	ohmPerCount: upToOhm / 2_000
}));

export const usualMeter: MeterTyped = { name: '', ranges: usualRanges.map(typedRange) };

/** The text of a resistance in the unit people say it in, which the field reads back. */
export function ohmText(ohm: number): string {
	return shownValue(ohm, 'resistance', ohm >= 1e6 ? 'megohm' : ohm >= 1000 ? 'kilohm' : 'ohm');
}

function typedRange(range: MeterRange): RangeTyped {
	return {
		upTo: ohmText(range.upToOhm),
		percent: shownNumber(range.percent, 'part', 'one'),
		counts: wholeText(range.counts),
		digit: ohmText(range.ohmPerCount)
	};
}

export const typedOf = ({ name, ranges }: MeterInput): MeterTyped => ({ name, ranges: ranges.map(typedRange) });

export type MeterParsed = { ok: true; value: MeterInput } | { ok: false; typed: MeterTyped; errors: MeterErrors };

function typedFrom(form: FormData): MeterTyped {
	const text = (name: string) => {
		const value = form.get(name);
		return typeof value === 'string' ? value : '';
	};
	const ranges = Array.from({ length: meterLimits.rangesMax }, (_, i): RangeTyped => ({
		upTo: text(`upTo-${i}`),
		percent: text(`percent-${i}`),
		counts: text(`counts-${i}`),
		digit: text(`digit-${i}`)
	}));
	// Rows left empty at the end are no ranges; the form makes its own anew.
	const last = ranges.findLastIndex((range) => !isBlank(range));
	return { name: text('name'), ranges: ranges.slice(0, last + 1) };
}

const isBlank = (range: RangeTyped): boolean => rangeFields.every((field) => range[field].trim() === '');

/** @param units for numbers without a unit: ranges in the person's own, one count always in Ω */
export function parseMeterForm(form: FormData, units: UnitPreference): MeterParsed {
	const typed = typedFrom(form);
	const errors: MeterErrors = {};
	const name = nameField(meterLimits.nameMax).safeParse(typed.name);
	if (!name.success) errors['name'] = name.error.issues[0]!.message;
	const ranges: MeterRange[] = [];
	const upTo = measure('Reads up to', 'resistance', units.resistance, meterLimits.upToOhm);
	const percent = measure('± of the reading', 'part', 'percent', [0, meterLimits.percent[1] / 100]);
	const digit = measure('One count', 'resistance', 'ohm', meterLimits.ohmPerCount);
	typed.ranges.forEach((range, i) => {
		if (isBlank(range)) return;
		const take = (field: RangeField, by: typeof upTo): number => {
			const read = readMeasure(range[field], by);
			if (!read.ok) errors[`${field}-${i}`] = read.sentence;
			return read.ok ? (read.value ?? 0) : 0;
		};
		const counts = typedWhole(range.counts, ['counts', 'count', 'digits', 'dgt']);
		const [least, most] = meterLimits.counts;
		if (counts === null || counts > most) {
			errors[`counts-${i}`] = `Counts: ${least} to ${wholeText(most)}; ${keptAsTyped(range.counts)}`;
		}
		const found: MeterRange = {
			upToOhm: take('upTo', upTo),
			percent: 100 * take('percent', percent),
			counts: counts ?? 0,
			ohmPerCount: take('digit', digit)
		};
		if (errors[`upTo-${i}`] === undefined) {
			if (ranges.some((other) => other.upToOhm === found.upToOhm)) {
				errors[`upTo-${i}`] =
					`Reads up to: another range reads up to ${ohmText(found.upToOhm)}; leave one of them empty.`;
			} else if (errors[`digit-${i}`] === undefined && found.ohmPerCount > found.upToOhm) {
				errors[`digit-${i}`] = `One count: no more than the range itself; ${keptAsTyped(range.digit)}`;
			}
		}
		ranges.push(found);
	});
	if (ranges.length === 0) errors['upTo-0'] ??= 'Reads up to: give one range at least; nothing was typed.';
	if (!name.success || Object.keys(errors).length > 0) return { ok: false, typed, errors };
	return { ok: true, value: { name: name.data, ranges: ranges.sort((a, b) => a.upToOhm - b.upToOhm) } };
}

export const nameTaken = (name: string): MeterErrors => ({
	name: `Name: “${name}” is another meter’s. Choose one not in use; the rest was kept as typed.`
});
