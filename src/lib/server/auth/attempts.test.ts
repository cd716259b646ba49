import { describe, expect, it } from 'vitest';
import { Attempts, clientKey, waitInWords } from './attempts.ts';

const limit = { attemptsMax: 3, windowMs: 60_000, keysMax: 4 };

describe('attempts', () => {
	it('the one after the last allowed says how long to wait', () => {
		const attempts = new Attempts(limit);
		expect([0, 1000, 2000].map((at) => attempts.take('a', at))).toEqual([0, 0, 0]);
		expect(attempts.take('a', 10_000)).toBe(50_000);
	});
	it('a refused attempt does not lengthen the wait', () => {
		const attempts = new Attempts(limit);
		for (let i = 0; i < 3; i++) attempts.take('a', 0);
		attempts.take('a', 59_000);
		expect(attempts.take('a', 59_999)).toBe(1);
		expect(attempts.take('a', 60_000)).toBe(0);
	});
	it('one key does not slow another', () => {
		const attempts = new Attempts(limit);
		for (let i = 0; i < 4; i++) attempts.take('a', 0);
		expect(attempts.take('b', 0)).toBe(0);
	});
	it('the right password starts the count anew', () => {
		const attempts = new Attempts(limit);
		for (let i = 0; i < 3; i++) attempts.take('a', 0);
		attempts.forget('a');
		expect(attempts.take('a', 1)).toBe(0);
	});
	it('memory stays bounded whatever is tried', () => {
		const attempts = new Attempts(limit);
		for (let i = 0; i < 1000; i++) attempts.take(`key ${i}`, i);
		expect(attempts.size).toBe(limit.keysMax);
	});
	it('windows that ended are the first to go', () => {
		const attempts = new Attempts(limit);
		attempts.take('old', 0);
		attempts.take('new', 70_000);
		expect(attempts.size).toBe(1);
	});
});

describe('one client', () => {
	it.each([
		['192.0.2.7', '192.0.2.7'],
		['::ffff:192.0.2.7', '192.0.2.7'],
		['2001:db8:1:2:3:4:5:6', '2001:db8:1:2::/64'],
		['2001:db8:1:2::9', '2001:db8:1:2::/64'],
		['2001:DB8::1', '2001:db8:0:0::/64'],
		['fe80::1%eth0', 'fe80:0:0:0::/64'],
		['::1', '0:0:0:0::/64']
	])('%s counts as %s', (address, key) => expect(clientKey(address)).toBe(key));
});

describe('a wait in words', () => {
	it.each([
		[1, '1 second'],
		[1001, '2 seconds'],
		[59_001, '1 minute'],
		[60_001, '2 minutes'],
		[900_000, '15 minutes']
	])('%i ms is %s', (ms, words) => expect(waitInWords(ms)).toBe(words));
});
