/** Figures of a measurement. */

/**
 * The value that a share `part` of the samples does not pass, by nearest rank: always a sample, never a mean of two.
 * Throws where there is none.
 */
export function percentile(samples: readonly number[], part: number): number {
	if (samples.length === 0) throw new RangeError('There are no samples to rank.');
	const ranked = Float64Array.from(samples).sort();
	return ranked[Math.max(0, Math.ceil(part * ranked.length) - 1)] as number;
}

/** The middle one; of an even number the mean of the two in the middle. Throws where there is none. */
export function median(samples: readonly number[]): number {
	if (samples.length === 0) throw new RangeError('There are no samples to rank.');
	const ranked = [...samples].sort((a, b) => a - b);
	const middle = ranked.length / 2;
	return ((ranked[Math.ceil(middle) - 1] as number) + (ranked[Math.floor(middle)] as number)) / 2;
}

/** A number with the digits it deserves: three that count, no more than two after the point. */
export function figure(value: number): string {
	const digits = Math.abs(value) >= 100 ? 0 : Math.abs(value) >= 10 ? 1 : 2;
	// No more than two digits stand after the point: groups of three are in front of it.
	return value.toFixed(digits).replace(/\B(?=(\d{3})+$)/g, ',');
}
