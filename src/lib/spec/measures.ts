import {
	quantities,
	shownNumber,
	shownValue,
	typedValue,
	type Quantity,
	type Typed,
	type UnitOf
} from '../coil/units.ts';
import { keptAsTyped, quoted } from '../typed-values.ts';

/**
 * One field that holds a measured value: how it is read and written for one person, and the range it makes sense in. SI
 * inside, the person's unit in the text.
 */
export interface Measure {
	/** As the field is called. */
	label: string;
	/** The unit of a bare number, as it stands beside the field; empty where the text carries its own. */
	symbol: string;
	range: readonly [min: number, max: number];
	/** What an empty field means, such as "flat"; null: it must be filled. */
	empty: string | null;
	read(text: string): Typed;
	/** Plain decimals, which `read` takes back. */
	write(si: number, digits?: number): string;
	/** A value as it is told, with its unit. */
	tell(si: number, digits?: number): string;
}

export function measure<Q extends Quantity>(
	label: string,
	quantity: Q,
	unit: UnitOf<Q>,
	range: readonly [number, number],
	empty: string | null = null
): Measure {
	const { symbol } = quantities[quantity][unit] as { symbol: string };
	return {
		label,
		symbol,
		range,
		empty,
		read: (text) => typedValue(text, quantity, unit),
		write: (si, digits) => shownNumber(si, quantity, unit, digits),
		tell: (si, digits) => shownValue(si, quantity, unit, digits)
	};
}

const metresPerFoot = 0.3048;

/** Capacitance of a cable by its length, in pF/m or pF/ft: no unit of its own elsewhere. */
export function perLengthMeasure(label: string, per: 'm' | 'ft', range: readonly [number, number]): Measure {
	const metres = per === 'm' ? 1 : metresPerFoot;
	const plain = measure(label, 'capacitance', 'picofarad', range);
	return {
		...plain,
		symbol: `pF/${per}`,
		read(text) {
			const named = / ?\/ ?(m|ft)\.?$/i.exec(text.trim());
			const length = named ? (named[1]!.toLowerCase() === 'm' ? 1 : metresPerFoot) : metres;
			const typed = plain.read(named ? text.trim().slice(0, named.index) : text);
			return typed.ok ? { ok: true, value: typed.value / length } : typed;
		},
		write: (si, digits) => plain.write(si * metres, digits),
		tell: (si, digits) => `${plain.write(si * metres, digits)} pF/${per}`
	};
}

/** Six digits in another unit may miss a bound by their rounding: whoever types the bound means it. */
const atLeast = (a: number, b: number): boolean => a >= b - 5e-6 * Math.abs(b);

/** A bound in as few digits as still lie inside the range. */
function bound(si: number, { range, read, write }: Measure): string {
	for (const digits of [3, 4, 5]) {
		const text = write(si, digits);
		const back = read(text);
		if (back.ok && atLeast(back.value, range[0]) && atLeast(range[1], back.value)) return text;
	}
	return write(si);
}

/** The range of a field in the person's unit, such as "0.5 to 200 mm", with what an empty field means. */
export function rangeText(field: Measure, range = field.range): string {
	const at = { ...field, range };
	const unit = field.symbol === '' ? '' : ` ${field.symbol}`;
	const text = `${bound(range[0], at)} to ${bound(range[1], at)}${unit}`;
	return field.empty === null ? text : `${text}, or empty for ${field.empty}`;
}

export type Measured = { ok: true; value: number | null } | { ok: false; sentence: string };

/** One field through its measure; null is an empty field that may be. A refusal is a sentence for under the field. */
export function readMeasure(text: string, field: Measure, range = field.range): Measured {
	if (text.trim() === '' && field.empty !== null) return { ok: true, value: null };
	const typed = field.read(text);
	if (!typed.ok && typed.why === 'two-meanings') {
		return {
			ok: false,
			sentence: `${field.label}: the comma in ${quoted(text)} may set off decimals or thousands; write a point for decimals, or no mark. It was kept as typed.`
		};
	}
	if (!typed.ok && typed.why === 'unit') {
		const unit = field.symbol === '' ? 'without a unit' : `in ${field.symbol}`;
		return {
			ok: false,
			sentence: `${field.label}: ${quoted(text)} has a unit that does not belong here; write it ${unit}. It was kept as typed.`
		};
	}
	if (typed.ok && atLeast(typed.value, range[0]) && atLeast(range[1], typed.value)) {
		return { ok: true, value: Math.min(range[1], Math.max(range[0], typed.value)) };
	}
	return { ok: false, sentence: `${field.label}: ${rangeText(field, range)}; ${keptAsTyped(text)}` };
}

/** A chosen one of some; the sentence when it is none of them. */
export function readChoice<Value extends string>(
	text: string,
	label: string,
	options: readonly { value: Value; label: string }[]
): { ok: true; value: Value } | { ok: false; sentence: string } {
	const found = options.find(({ value }) => value === text);
	return found
		? { ok: true, value: found.value }
		: {
				ok: false,
				sentence: `${label}: choose one of ${options.map((option) => option.label).join(', ')}; ${keptAsTyped(text)}`
			};
}
