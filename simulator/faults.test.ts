import { describe, expect, it } from 'vitest';
import { parseDeviceLine } from '../src/lib/turnline/index.ts';
import { inOutage, noFaults, Pipe, type FaultTraits } from './faults.ts';
import { randomFrom } from './random.ts';

const sent = Array.from({ length: 2000 }, (_, at) => `line ${at}`);

function through(traits: Partial<FaultTraits>, seed = 1) {
	const pipe = new Pipe({ ...noFaults, ...traits }, randomFrom(seed, 'pipe'));
	const got: string[] = [];
	for (const [at, text] of sent.entries()) {
		pipe.push(text, at * 10);
		got.push(...pipe.due(at * 10));
	}
	got.push(...pipe.due(Infinity));
	return got;
}

describe('a link', () => {
	it('without faults brings every line once, in order and at once', () => {
		expect(through({})).toEqual(sent);
	});

	it('that drops loses about that share and changes nothing else', () => {
		const got = through({ drop: 0.2 });
		expect(got.length).toBeGreaterThan(1500);
		expect(got.length).toBeLessThan(1700);
		expect(got).toEqual(sent.filter((line) => got.includes(line)));
	});

	it('that doubles loses none', () => {
		const got = through({ double: 0.2 });
		expect(new Set(got)).toEqual(new Set(sent));
		expect(got.length).toBeGreaterThan(2300);
	});

	it('that reorders loses none and changes the order', () => {
		const got = through({ reorder: 0.2 });
		expect([...got].sort()).toEqual([...sent].sort());
		expect(got).not.toEqual(sent);
	});

	it('that only delays keeps the order', () => {
		expect(through({ delayMs: 200 })).toEqual(sent);
		const pipe = new Pipe({ ...noFaults, delayMs: 200 }, randomFrom(1, 'pipe'));
		pipe.push('late', 0);
		expect(pipe.due(99)).toEqual([]);
		expect(pipe.due(300)).toEqual(['late']);
	});

	it('that spoils makes lines nobody acts on', () => {
		const good = 'E b=5C0E91A7 n=1 e=1 f=0 v=0 t=980 k=go ~E4E9';
		const pipe = new Pipe({ ...noFaults, corrupt: 1 }, randomFrom(1, 'pipe'));
		for (let at = 0; at < 500; at++) pipe.push(good, 0);
		const got = pipe.due(0);
		expect(got).toHaveLength(500);
		for (const text of got) {
			expect(text).not.toBe(good);
			const parsed = parseDeviceLine(text);
			// What begins with # is a comment, and is not acted on either.
			expect(parsed.ok && parsed.line !== null).toBe(false);
		}
	});

	it('does the same for the same seed', () => {
		const bad = { drop: 0.1, double: 0.1, reorder: 0.1, corrupt: 0.1, delayMs: 50 };
		expect(through(bad, 4)).toEqual(through(bad, 4));
		expect(through(bad, 4)).not.toEqual(through(bad, 5));
	});

	it('is out from the first moment of an outage to the last', () => {
		const traits = { ...noFaults, outages: [{ fromS: 20, forS: 15 }] };
		expect([19_999, 20_000, 34_999, 35_000].map((ms) => inOutage(traits, ms))).toEqual([false, true, true, false]);
	});
});
