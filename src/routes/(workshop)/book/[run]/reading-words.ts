import type { Agreement } from '../../../../lib/coil/band.ts';

/** How kinds and stages of readings are said, for forms, tables and files. */

export const kindOptions = [
	{ value: 'resistance', label: 'resistance' },
	{ value: 'outer-width', label: 'outer width' },
	{ value: 'inductance', label: 'inductance' }
] as const;

export const stageOptions = [
	{ value: 'wound', label: 'wound' },
	{ value: 'leads', label: 'after the leads' },
	{ value: 'tape', label: 'after the tape' },
	{ value: 'assembled', label: 'assembled' },
	{ value: 'covered', label: 'covered' }
] as const;

export const kindText = (kind: string): string => kindOptions.find(({ value }) => value === kind)?.label ?? kind;
export const stageText = (stage: string): string => stageOptions.find(({ value }) => value === stage)?.label ?? stage;

/** Longest note of a reading, in characters. */
export const noteMax = 500;

/** A verdict on what is no resistance: nothing is broken by a width. */
export const sideText: Record<Extract<Agreement, 'within' | 'above' | 'below'>, string> = {
	within: 'Agrees',
	above: 'Above',
	below: 'Below'
};
