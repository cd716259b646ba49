import { describe, expect, it } from 'vitest';
import { factKinds } from './winding/types.ts';
import {
	directionSentence,
	factsWorthTelling,
	factText,
	faultText,
	linkText,
	lookNoteText,
	offSentence
} from './winding-words.ts';

describe('plain words', () => {
	it.each(factKinds)('say what "%s" means, with and without detail', (kind) => {
		const bare = factText(kind, { turns: null, detail: {} });
		const full = factText(kind, {
			turns: 3187,
			detail: {
				mark: 500,
				note: 'even',
				over: 2,
				total: 4,
				uncertain: 9,
				reason: 'wire snapped',
				leftAt: 812,
				take: 8187
			}
		});
		for (const text of [bare, full]) {
			expect(text).toMatch(/^[A-Z]/);
			expect(text).not.toMatch(/null|undefined|NaN/);
		}
	});

	it('name the look and the maker’s word', () => {
		expect(factText('look-seen', { turns: 1002, detail: { mark: 1000, note: 'high-at-one-side' } })).toBe(
			'Look for 1,000: high at one side'
		);
		expect(lookNoteText(null)).toBe('wound on without a word');
	});

	it('say one turn in the singular', () => {
		expect(factText('taken-back', { turns: 10, detail: { turns: 1, total: 1 } })).toBe('Taken back 1 turn');
	});

	it('keep a kind of a later version readable', () => {
		expect(factText('wire-changed', { turns: 3, detail: {} })).toBe('wire changed');
	});

	it('do not give a number where none is known', () => {
		expect(faultText('restarted')).toBe('The winder restarted; how many turns it missed cannot be known');
	});

	it('say the direction always from the top of the bobbin', () => {
		expect(directionSentence('clockwise', 'in')).toBe(
			'Seen from the top of the bobbin, the wire goes on clockwise ↻. Top faces in.'
		);
	});

	it('say how far off', () => {
		expect([offSentence(2), offSentence(-1), offSentence(0)]).toEqual(['2 over', '1 short', 'on the mark']);
	});
});

describe('what is told of a run', () => {
	type Line = [kind: string, atS: number, turns: number | null, detail?: Record<string, string>];
	const told = (...lines: Line[]) =>
		factsWorthTelling(
			lines.map(([kind, atS, turns, detail = {}]) => ({ kind, at: new Date(atS * 1000), turns, detail }))
		).map(({ kind, turns }) => `${kind} ${turns}`);

	it('leaves out a spindle rocked in one place', () => {
		expect(told(['moved', 1, 0], ['stopped', 2, 1], ['went-on', 4, 1], ['stopped', 5, 2], ['went-on', 5.4, 2])).toEqual(
			['moved 0']
		);
	});

	it.each<[string, Line[]]>([
		[
			'a longer stand',
			[
				['stopped', 2, 9],
				['went-on', 4.1, 9]
			]
		],
		[
			'turns made meanwhile',
			[
				['stopped', 2, 9],
				['went-on', 3, 8]
			]
		],
		[
			'something said meanwhile',
			[
				['stopped', 2, 9],
				['look-seen', 2, 9],
				['went-on', 3, 9]
			]
		],
		['a stand that lasts', [['stopped', 2, 9]]]
	])('keeps %s', (_, lines) => {
		expect(told(...lines)).toHaveLength(lines.length);
	});

	it('names a tap that waited over three seconds, and no shorter wait', () => {
		const tap: Line = ['tap-waiting', 10, 9, { tap: 'keep' }];
		const kept: Line = ['kept', 10, 9];
		expect(told(tap, ['stopped', 11, 9], kept)).not.toContain('tap-waiting 9');
		expect(told(tap, kept, ['caught-up', 13, 9])).not.toContain('tap-waiting 9');
		expect(told(tap, kept, ['caught-up', 75, 9])).toContain('tap-waiting 9');
		expect(told(tap, ['stopped', 14, 9], kept)).toContain('tap-waiting 9');
		expect(told(tap)).toContain('tap-waiting 9');
	});
});

describe('the link of a winder', () => {
	it('that is old says how old the last line is, where nothing beside says it', () => {
		expect(linkText('old', 2_100)).toBe('old: last line 2 s ago');
		expect(linkText('old')).toBe('old');
		expect(linkText('live', 400)).toBe('live');
	});
});
