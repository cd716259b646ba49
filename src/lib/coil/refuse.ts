/**
 * An input outside physical sense. A value, not an exception: whoever asked shows the field and its range beside it.
 */
export interface Refused {
	ok: false;
	/** The input at fault, by its own name. */
	field: string;
	min: number;
	max: number;
	/** What came; null where it was no finite number. */
	got: number | null;
}

export type Result<T> = { ok: true; value: T } | Refused;

export const ok = <T>(value: T): Result<T> => ({ ok: true, value });

/** One field and the range it makes sense in, SI. */
export type Bound = readonly [field: string, value: number, min: number, max: number];

/** The first bound that does not hold; NaN and the infinities hold none. */
export function outside(bounds: readonly Bound[]): Refused | null {
	for (const [field, value, min, max] of bounds) {
		if (value >= min && value <= max && Number.isFinite(value)) continue;
		return { ok: false, field, min, max, got: Number.isFinite(value) ? value : null };
	}
	return null;
}

/**
 * For the plain formulas that take checked values: a result that is no finite number is a mistake in the program that
 * called, and NaN spreads silently, so it stops here.
 *
 * @throws RangeError
 */
export function sound(value: number): number {
	if (!Number.isFinite(value)) throw new RangeError('A formula was given a value it has no answer for.');
	return value;
}
