import { describe, expect, it } from 'vitest';
import { lengthOf, typedDay, typedLine, typedText, typedWhole } from './typed-values.ts';

describe('a whole number as people type it', () => {
	it.each([
		['5320', 5320],
		['5,320', 5320],
		['5 320', 5320],
		['5\u202f320', 5320],
		['5\u00a0320', 5320],
		['5.320', 5320],
		["5'320", 5320],
		['  5320  ', 5320],
		['100,000', 100000],
		['1,000,000,000', 1_000_000_000],
		['0', 0],
		['0500', 500]
	])('"%s" is read', (text, value) => {
		expect(typedWhole(text)).toBe(value);
	});

	it.each([
		'',
		'   ',
		'-3',
		'+5',
		'1e9',
		'10⁹',
		'5,32',
		'5.5',
		'5,3200',
		'1,000.000',
		'0.500',
		'NaN',
		'0x10',
		'٥٣٢٠',
		'5320 tuns',
		'12345678901234567890'
	])('"%s" is not taken for a number', (text) => {
		expect(typedWhole(text, ['turns'])).toBeNull();
	});

	it('takes its unit behind it', () => {
		expect(typedWhole('5,320 turns', ['turns', 'turn'])).toBe(5320);
		expect(typedWhole('5320TURNS', ['turns', 'turn'])).toBe(5320);
		expect(typedWhole('turns', ['turns', 'turn'])).toBeNull();
	});
});

describe('text', () => {
	it('of one line loses line ends and control characters, and keeps emoji and right-to-left writing', () => {
		expect(typedLine(' neck\r\ncoil\u0000 🧲 شريط ')).toBe('neck coil  🧲 شريط');
		expect(typedLine('neck\ud83e coil \udf4b')).toBe('neck  coil');
	});

	it('of several lines keeps its lines', () => {
		expect(typedText(' one\r\ntwo\rthree\u0007\n')).toBe('one\ntwo\nthree');
	});

	it('is measured in code points', () => {
		expect(lengthOf('🧲🧲')).toBe(2);
	});
});

describe('a day', () => {
	it('that exists is taken', () => {
		expect(typedDay('2028-02-29')).toBe('2028-02-29');
	});

	it.each(['2027-02-29', '2026-13-01', '2026-00-10', '1 Dec 2026', '', '9999-01-01', "2026-12-01'"])(
		'"%s" is refused',
		(text) => {
			expect(typedDay(text)).toBeNull();
		}
	);
});
