import { describe, expect, it } from 'vitest';
import { actions, may, type Action, type Actor } from './may.ts';

const actors: Actor[] = ['owner', 'maker', 'apprentice', 'winder'];

// y: may, -: may not; columns as in `actors`. Written out so that a change of the rule must be made twice.
const table: Record<Action, string> = {
	'me.change': 'yyy-',
	'bench.see': 'yyy-',
	'bench.tap': 'yyy-',
	'queue.see': 'yyy-',
	'queue.change': 'yy--',
	'book.read': 'yyy-',
	'book.note': 'yy--',
	'spec.see': 'yyy-',
	'spec.change': 'yy--',
	'spool.see': 'yyy-',
	'spool.change': 'yy--',
	'meter.change': 'yy--',
	'reading.add': 'yyy-',
	'reading.strike': 'yy--',
	'winder.see': 'yy--',
	'winder.change': 'y---',
	'people.change': 'y---',
	'workshop.change': 'y---',
	'lines.send': '---y',
	'live.read': 'yyyy'
};

describe('who may do what', () => {
	it('every action stands in the table', () => {
		expect(actions.toSorted()).toEqual(Object.keys(table).toSorted());
	});
	for (const [action, marks] of Object.entries(table) as [Action, string][]) {
		for (const [i, actor] of actors.entries()) {
			const expected = marks[i] === 'y';
			it(`${actor} ${expected ? 'may' : 'may not'} ${action}`, () => expect(may(actor, action)).toBe(expected));
		}
	}
	it('an unknown role may do nothing', () => {
		for (const action of actions) expect(may('visitor' as Actor, action)).toBe(false);
	});
});
