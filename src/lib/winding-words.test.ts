import { describe, expect, it } from 'vitest';
import { factKinds } from './winding/types.ts';
import { directionSentence, factText, faultText, lookNoteText, offSentence } from './winding-words.ts';

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
