import { describe, expect, it } from 'vitest';
import { countSince, verdictOf } from './count-check.ts';

describe('ten turns by hand', () => {
	it('counted as ten are right', () => {
		expect(verdictOf({ forward: 10, reverse: 0 }, 1, false).kind).toBe('right');
	});

	it('counted twice name the pulses per turn to set', () => {
		const verdict = verdictOf({ forward: 20, reverse: 0 }, 1, false);
		expect(verdict.kind).toBe('multiple');
		expect(verdict.says).toBe('20 turns counted for 10 by hand. That is twice as many.');
		expect(verdict.todo).toContain('set pulses per turn to 2');
	});

	it('counted half say what to change', () => {
		expect(verdictOf({ forward: 5, reverse: 0 }, 4, false).todo).toContain('Set pulses per turn to 2');
		expect(verdictOf({ forward: 5, reverse: 0 }, 1, false).todo).toContain('Every second pulse is missed');
	});

	it('that come as reverse are right, with a word on the way they came', () => {
		const verdict = verdictOf({ forward: 0, reverse: 10 }, 1, true);
		expect(verdict.kind).toBe('right');
		expect(verdict.todo).toContain('reverse turns');
	});

	it('counted both ways ask not to rock', () => {
		expect(verdictOf({ forward: 9, reverse: 1 }, 1, true).kind).toBe('both-ways');
	});

	it('counted as nothing point to the sensor', () => {
		expect(verdictOf({ forward: 0, reverse: 0 }, 1, true).kind).toBe('nothing');
	});

	it.each([7, 11, 13, 19])('counted as %i ask to try again', (forward) => {
		expect(verdictOf({ forward, reverse: 0 }, 1, false).kind).toBe('other');
	});
});

describe('the count since the start of the check', () => {
	it('is the growth of both totals', () => {
		const start = { boot: '5C0E91A7', forward: 100, reverse: 4 };
		expect(countSince(start, { boot: '5C0E91A7', forward: 110, reverse: 5 })).toEqual({ forward: 10, reverse: 1 });
	});

	it('is unknown once the winder restarted', () => {
		const start = { boot: '5C0E91A7', forward: 100, reverse: 4 };
		expect(countSince(start, { boot: '77AA01F3', forward: 3, reverse: 0 })).toBeNull();
		expect(countSince({ ...start, boot: null }, { ...start, boot: null })).toBeNull();
	});
});
