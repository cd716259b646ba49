import { describe, expect, it } from 'vitest';
import { readAsked, writeAsked } from './sides.ts';

const own = '3b0c1f6e-0b0e-4a53-9d6c-6f4f6a3c9f10';
const other = '9d2f4c1a-7a43-4b8e-8a2e-1f0f5f6f7a11';

describe('the address of a revision', () => {
	it('is its number alone within its spec, and names the other one', () => {
		expect(writeAsked(own, own, 2)).toBe('2');
		expect(writeAsked(own, other, 2)).toBe(`${other}:2`);
	});

	it('is read back', () => {
		expect(readAsked('12')).toEqual({ spec: null, no: 12 });
		expect(readAsked(writeAsked(own, other, 3))).toEqual({ spec: other, no: 3 });
	});

	it.each(['', '0', '-1', '1.5', '1e3', 'latest', ' 1', '123456', `${other}:`, `${other}:0`, `:1`, 'x:1'])(
		'is none in %j',
		(text) => {
			expect(readAsked(text)).toBeNull();
		}
	);
});
