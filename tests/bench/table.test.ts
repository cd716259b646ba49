import { expect, it } from 'vitest';
import { markdownTable } from './table.ts';

it('a table stands in columns, words to the left and figures to the right', () => {
	expect(
		markdownTable(
			['way', 'p99 ms'],
			[
				['relay', '1.20'],
				['a longer | one', '12.3']
			]
		)
	).toBe(
		[
			'| way             | p99 ms |',
			'| --------------- | -----: |',
			'| relay           |   1.20 |',
			'| a longer \\| one |   12.3 |'
		].join('\n')
	);
});
