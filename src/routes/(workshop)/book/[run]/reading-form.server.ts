import { rangeFor } from '../../../../lib/coil/measurement.ts';
import { quantities, shownValue, typedValue, type UnitPreference } from '../../../../lib/coil/units.ts';
import type { Meter } from '../../../../lib/server/db/meters.ts';
import { isUuid } from '../../../../lib/server/db/ids.ts';
import type { ReadingInput } from '../../../../lib/server/db/readings.ts';
import type { ReadingKind, ReadingStage } from '../../../../lib/server/db/schema.ts';
import { measure, readChoice, readMeasure, type Measure } from '../../../../lib/spec/measures.ts';
import { keptAsTyped, lengthOf, typedLine } from '../../../../lib/typed-values.ts';
import { kindOptions, noteMax, stageOptions } from './reading-words.ts';

/** One reading: text fields in, SI or sentences out. Nothing typed is lost on the way. */

export const readingFields = [
	'id',
	'what',
	'value',
	'open',
	'temperature',
	'temperatureHalf',
	'meter',
	'half',
	'stage',
	'note'
] as const;
export type ReadingField = (typeof readingFields)[number];
export type ReadingTyped = Record<ReadingField, string>;

export type ReadingParsed =
	| { ok: true; value: ReadingInput & { id: string } }
	| { ok: false; typed: ReadingTyped; errors: Partial<Record<ReadingField, string>> };

/** What a coil may read; a short is next to nothing, and above ten megohms no wire is left whole. */
const resistanceOhm = [0, 1e7] as const;
/** A pickup's coil and what a caliper spans. */
const outerWidthM = [0.001, 0.2] as const;
const inductanceH = [1e-6, 1e3] as const;

export const measureOf = (kind: ReadingKind, units: UnitPreference): Measure =>
	kind === 'resistance'
		? measure('Value', 'resistance', units.resistance, resistanceOhm)
		: kind === 'outer-width'
			? measure('Value', 'length', units.length, outerWidthM)
			: measure('Value', 'inductance', 'henry', inductanceH);

/** Whole degrees of the room, and how far off they may be, in the person's own unit. */
export const usualTemperature = (units: UnitPreference) =>
	units.temperature === 'celsius'
		? { temperature: '20', temperatureHalf: '1' }
		: { temperature: '68', temperatureHalf: '2' };

export function blankReading(
	units: UnitPreference,
	id: string,
	meter: string,
	stage: ReadingStage = 'wound'
): ReadingTyped {
	return {
		id,
		what: 'resistance',
		value: '',
		open: '',
		...usualTemperature(units),
		meter,
		half: '',
		stage,
		note: ''
	};
}

/** What stands in the fields, whatever it is worth. */
export function typedOf(form: FormData): ReadingTyped {
	return Object.fromEntries(
		readingFields.map((field) => {
			const value = form.get(field);
			return [field, typeof value === 'string' ? value : ''];
		})
	) as ReadingTyped;
}

const temperatureLimits = [-40, 150] as const;
const halfLimitsK = [0, 50] as const;

export function parseReadingForm(
	form: FormData,
	units: UnitPreference,
	meters: readonly Pick<Meter, 'id' | 'name' | 'ranges'>[]
): ReadingParsed {
	const typed = typedOf(form);
	const errors: Partial<Record<ReadingField, string>> = {};
	const refuse = (field: ReadingField, sentence: string) => {
		errors[field] ??= sentence;
		return null;
	};

	if (!isUuid(typed.id))
		refuse('id', 'This form came without its number. Open the page anew; what you typed was kept.');
	const what = readChoice<ReadingKind>(typed.what, 'What', kindOptions);
	if (!what.ok) refuse('what', what.sentence);
	const stage = readChoice<ReadingStage>(typed.stage, 'Stage', stageOptions);
	if (!stage.ok) refuse('stage', stage.sentence);
	const note = typedLine(typed.note);
	if (lengthOf(note) > noteMax) {
		refuse('note', `Note: up to ${noteMax} characters; ${lengthOf(note)} were kept as typed.`);
	}
	const kind: ReadingKind = what.ok ? what.value : 'resistance';
	const by = measureOf(kind, units);
	const open = typed.open !== '';
	let value: number | null = null;
	if (open && kind !== 'resistance') {
		refuse('open', 'No reading: an open coil shows on the resistance alone. Choose resistance, or type the value.');
	} else if (open && typed.value.trim() !== '') {
		refuse('value', `Value: either a number or “no reading”, not both; ${keptAsTyped(typed.value)}`);
	} else if (!open) {
		const read = readMeasure(typed.value, by);
		if (read.ok) value = read.value;
		else {
			const more = kind === 'resistance' ? ' If the meter showed none, tick “no reading”.' : '';
			refuse('value', `${read.sentence}${more}`);
		}
	}

	let temperatureC: number | null = null;
	let temperatureHalfWidthC: number | null = null;
	if (kind === 'resistance') {
		const temperature = measure('Temperature', 'temperature', units.temperature, temperatureLimits);
		const read = readMeasure(typed.temperature, temperature);
		temperatureC = read.ok ? read.value : refuse('temperature', read.sentence);
		const half = typedKelvin(typed.temperatureHalf, units);
		temperatureHalfWidthC =
			half !== null && half >= halfLimitsK[0] && half <= halfLimitsK[1]
				? half
				: refuse(
						'temperatureHalf',
						`± of the temperature: 0 to ${units.temperature === 'celsius' ? '50 °C' : '90 °F'}; ${keptAsTyped(typed.temperatureHalf)}`
					);
	}

	// Ohms come from a meter of the list; a caliper or a bridge says its ± itself.
	const chosen = kind === 'resistance' ? typed.meter : '';
	const meter = meters.find(({ id }) => id === chosen) ?? null;
	if (chosen !== '' && chosen !== noMeter && !meter) {
		refuse('meter', 'Meter: it is no longer in use. Choose another, or type the ± without one.');
	}
	let meterRange = null;
	if (meter && value !== null) {
		meterRange = rangeFor(meter.ranges, value);
		if (!meterRange) {
			const most = by.tell(Math.max(...meter.ranges.map(({ upToOhm }) => upToOhm)));
			refuse(
				'value',
				`Value: “${meter.name}” reads up to ${most}; ${keptAsTyped(typed.value)} If it showed no number, tick “no reading”.`
			);
		}
	}
	let halfWidth: number | null = null;
	if (!meter && value !== null) {
		halfWidth = typedHalf(typed.half, value, kind, units);
		if (halfWidth === null) {
			const example =
				kind === 'resistance'
					? `1 %, or ${shownValue(50, 'resistance', units.resistance)}`
					: kind === 'outer-width'
						? shownValue(units.length === 'mm' ? 0.0001 : 0.000127, 'length', units.length)
						: '2 %';
			const without = kind === 'resistance' ? ' without a meter' : '';
			refuse(
				'half',
				`±${without}: how far the value may be off, such as ${example}, and no more than it; ${keptAsTyped(typed.half)}`
			);
		}
	}

	if (Object.keys(errors).length > 0 || !stage.ok) return { ok: false, typed, errors };
	return {
		ok: true,
		value: {
			id: typed.id,
			kind,
			stage: stage.value,
			value,
			temperatureC,
			temperatureHalfWidthC,
			meterId: meter?.id ?? null,
			meterRange,
			halfWidth,
			note
		}
	};
}

/** The choice of none, told apart from a form without the field. */
export const noMeter = 'none';

/** A difference of temperatures in kelvin: "1", "1 K", "2 °F". */
function typedKelvin(text: string, units: UnitPreference): number | null {
	const found = /^(.*?) ?(k|°? ?[cf])?$/i.exec(text.normalize('NFKC').trim());
	if (!found) return null;
	const typed = typedValue(found[1] ?? '', 'part', 'one');
	if (!typed.ok) return null;
	const said = found[2]?.toLowerCase();
	const fahrenheit = said === undefined ? units.temperature === 'fahrenheit' : said.endsWith('f');
	return fahrenheit ? (typed.value * 5) / 9 : typed.value;
}

/** A ± as part of the value ("1 %") or in its unit; null where it is none, or more than the value. */
function typedHalf(text: string, value: number, kind: ReadingKind, units: UnitPreference): number | null {
	const { symbol } = quantities.part.percent;
	const read = text.trim().endsWith(symbol) ? typedValue(text, 'part', 'percent') : measureOf(kind, units).read(text);
	if (!read.ok) return null;
	const half = text.trim().endsWith(symbol) ? read.value * value : read.value;
	// Of what reads next to nothing the leads alone are off by more than it is.
	const most = kind === 'resistance' ? Math.max(value, 1) : value;
	return half >= 0 && half <= most ? half : null;
}
