import { describe, expect, it } from 'vitest';
import {
	agoText,
	clockText,
	durationText,
	offText,
	recentText,
	sheetTimeText,
	turnsText,
	whenText,
	wholeText
} from './format.ts';

describe('figures', () => {
	it('are grouped by thousands', () => {
		expect([0, 999, 1000, 5320, 1071340].map(wholeText)).toEqual(['0', '999', '1,000', '5,320', '1,071,340']);
		expect(wholeText(-1234.4)).toBe('−1,234');
	});

	it('off the mark carry their sign', () => {
		expect([2, -1, 0].map(offText)).toEqual(['+2', '−1', '0']);
	});

	it('say one turn and two turns', () => {
		expect([1, 2, 0].map(turnsText)).toEqual(['1 turn', '2 turns', '0 turns']);
	});
});

describe('times', () => {
	it('of winding are minutes and seconds, with hours when there are any', () => {
		expect([0, 712_000, 59_600, 3_731_000].map(durationText)).toEqual(['0:00', '11:52', '1:00', '1:02:11']);
	});

	it('of day stand on the clock of the workshop', () => {
		// 00:30 UTC on 1 July is 20:30 the evening before in New York (UTC−4 in summer).
		const at = Date.UTC(2026, 6, 1, 0, 30, 9);
		expect(whenText(at, 'America/New_York')).toBe('30 Jun 2026 20:30');
		expect(clockText(at, 'Europe/London')).toBe('01:30:09');
		expect(sheetTimeText(at, 'UTC')).toBe('2026-07-01 00:30:09');
	});

	it('of this year do without the year', () => {
		// Half past midnight UTC on 1 January is still the old year in New York.
		const at = Date.UTC(2027, 0, 1, 0, 30);
		expect(recentText(at, 'UTC', 2027)).toBe('1 Jan 00:30');
		expect(recentText(at, 'America/New_York', 2027)).toBe('31 Dec 2026 19:30');
	});

	it('at midnight are 00, not 24', () => {
		expect(whenText(Date.UTC(2026, 0, 1), 'UTC')).toBe('1 Jan 2026 00:00');
	});

	it('ago get coarser as they get older', () => {
		expect([900, 12_000, 240_000, 7_300_000, 200_000_000].map(agoText)).toEqual([
			'just now',
			'12 s ago',
			'4 min ago',
			'2 h ago',
			'2 days ago'
		]);
	});
});
