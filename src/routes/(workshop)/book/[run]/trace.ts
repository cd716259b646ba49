/** The trace of a run as the chart and its table show it: the same numbers in both. */

export interface TracePoint {
	/** Seconds since the start, to a tenth. */
	s: number;
	/** Turns on the bobbin. */
	turns: number;
	rpm: number;
}

/** A chart some 1,000 px wide shows no more, and a table of more lines is not read. */
export const pointsMax = 1000;

/**
 * Parallel arrays as points, thinned evenly when there are more than fit, keeping the first, the last and the highest
 * speed.
 */
export function tracePoints(
	trace: { atMs: readonly number[]; turns: readonly number[]; rpm: readonly number[] },
	most = pointsMax
): TracePoint[] {
	const length = Math.min(trace.atMs.length, trace.turns.length, trace.rpm.length);
	const point = (i: number): TracePoint => ({
		s: Math.round((trace.atMs[i] ?? 0) / 100) / 10,
		turns: trace.turns[i] ?? 0,
		rpm: Math.abs(trace.rpm[i] ?? 0)
	});
	if (length <= most) return Array.from({ length }, (_, i) => point(i));
	const kept = new Set<number>();
	for (let k = 0; k < most - 1; k++) kept.add(Math.round((k * (length - 1)) / (most - 2)));
	let fastest = 0;
	for (let i = 1; i < length; i++) if (point(i).rpm > point(fastest).rpm) fastest = i;
	kept.add(fastest);
	return [...kept].sort((a, b) => a - b).map(point);
}
