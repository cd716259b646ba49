import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import type { Event, Tick } from '../../src/lib/turnline/index.ts';
import { Boots, hasGap, readMarks } from './boots.ts';

const b = '5C0E91A7';
const event = (e: number): Event => ({ verb: 'E', b, n: e, e, f: 0, v: 0, t: e, k: 'look' });
const tick = (n: number, e: number): Tick => ({ verb: 'T', b, n, e, f: 0, v: 0, r: 0, t: n });

describe('what is kept of a boot', () => {
	it('is acknowledged without a gap, in whatever order events come', () => {
		fc.assert(
			fc.property(fc.shuffledSubarray(Array.from({ length: 12 }, (_, i) => i + 1)), (order) => {
				const boots = new Boots();
				for (const e of order) boots.keep(event(e));
				let whole = 0;
				while (order.includes(whole + 1)) whole += 1;
				expect(boots.of(b)?.e ?? 0).toBe(whole);
				expect(order.every((e) => boots.hasEvent(b, e))).toBe(true);
			})
		);
	});

	it('shows a gap as soon as any line speaks of an event that is missing', () => {
		const boots = new Boots();
		boots.keep(event(1));
		expect(hasGap(boots.of(b)!)).toBe(false);
		boots.keep(tick(5, 2));
		expect(hasGap(boots.of(b)!)).toBe(true);
		boots.keep(event(2));
		expect(hasGap(boots.of(b)!)).toBe(false);
	});

	it('goes on behind what the winder has no more', () => {
		const boots = new Boots();
		boots.keep(event(1));
		boots.keep(event(4));
		boots.keep(event(7));
		boots.gone(b);
		expect(boots.of(b)).toMatchObject({ e: 4, ahead: [7] });
		boots.gone(b);
		expect(boots.of(b)).toMatchObject({ e: 7, ahead: [] });
	});

	it('is read back from what was written, and nothing is read from anything else', () => {
		const boots = new Boots();
		boots.keep(event(1));
		boots.keep(event(3));
		expect(readMarks(JSON.parse(JSON.stringify(boots.marks)))).toEqual(boots.marks);
		for (const other of [null, 7, 'x', [null], [{ b: 1 }], [{ b, n: -1, e: 0, eTop: 0, ahead: [] }]]) {
			expect(readMarks(other)).toEqual([]);
		}
	});
});
