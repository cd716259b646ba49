/** How the curves are told apart, by the dash first: colour never speaks alone. This spec's own comes first. */
export const lineLooks: readonly { dash: number[]; token: string; words: string }[] = [
	{ dash: [], token: 'copper', words: 'a whole line' },
	{ dash: [8, 4], token: 'verdigris', words: 'long dashes' },
	{ dash: [2, 4], token: 'look', words: 'dots' },
	{ dash: [8, 4, 2, 4], token: 'ink', words: 'dash and dot' }
];

/**
 * A sample of a line is drawn there and back. It ends in the middle of a dash or a gap of every pattern, so that both ways
 * fall on the same dashes and the line stays dashed.
 */
export const samplePx = 40;
