import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { parseBookQuery, parseFind } from './find.ts';

describe('what is typed to find a run', () => {
	it('is words and a number with its spread', () => {
		expect(parseFind('bridge, 5,300 ± 100 turns')).toEqual([
			{ kind: 'turns', from: 5200, to: 5400 },
			{ kind: 'word', text: 'bridge' }
		]);
	});

	it.each(['5300±100', '5 300 +/- 100', '5,300 +- 100', '5.300 ± 100 turn'])('reads "%s" as a spread', (text) => {
		expect(parseFind(text)).toEqual([{ kind: 'turns', from: 5200, to: 5400 }]);
	});

	it('reads a span', () => {
		expect(parseFind('5,200 to 5,400')).toEqual([{ kind: 'turns', from: 5200, to: 5400 }]);
		expect(parseFind('5200–5400 turns')).toEqual([{ kind: 'turns', from: 5200, to: 5400 }]);
	});

	it('takes a bare number for turns or part of a name', () => {
		expect(parseFind('5,320')).toEqual([{ kind: 'number', value: 5320, text: '5,320' }]);
		expect(parseFind('neck 2')).toEqual([
			{ kind: 'number', value: 2, text: '2' },
			{ kind: 'word', text: 'neck' }
		]);
	});

	it('takes a number with its unit for turns only', () => {
		expect(parseFind('240 turns')).toEqual([{ kind: 'turns', from: 240, to: 240 }]);
	});

	it('leaves a sticker whole', () => {
		expect(parseFind('K7-0031')).toEqual([{ kind: 'word', text: 'K7-0031' }]);
		expect(parseFind('7F3KQ')).toEqual([{ kind: 'word', text: '7F3KQ' }]);
	});

	it('keeps a phrase in quotes together', () => {
		expect(parseFind('"screw coil" neck')).toEqual([
			{ kind: 'word', text: 'screw coil' },
			{ kind: 'word', text: 'neck' }
		]);
	});

	it('of nothing is nothing', () => {
		expect(parseFind('  , ; ')).toEqual([]);
	});

	it('gives at most eight terms of bounded size, whatever is typed', () => {
		fc.assert(
			fc.property(fc.string({ maxLength: 400 }), (text) => {
				const terms = parseFind(text);
				expect(terms.length).toBeLessThanOrEqual(8);
				for (const term of terms) {
					if (term.kind === 'turns') expect(Number.isSafeInteger(term.from) && term.from <= term.to).toBe(true);
					else expect(term.text.length).toBeGreaterThan(0);
				}
			})
		);
	});
});

describe('the address of the bench book', () => {
	const ask = (query: string) => parseBookQuery(new URLSearchParams(query));

	it('without anything asks for all, newest first', () => {
		expect(ask('')).toMatchObject({
			filter: { terms: [], from: null, to: null, person: null, state: null },
			sort: 'when',
			descending: true,
			page: 1,
			refused: {}
		});
	});

	it('names a day it cannot read and leaves it out', () => {
		const query = ask('from=yesterday&to=2026-02-30');
		expect(query.filter).toMatchObject({ from: null, to: null });
		expect(query.refused.from).toContain('“yesterday” was left out');
		expect(query.refused.to).toMatch(/^To: a day/);
		expect(query.typed.from).toBe('yesterday');
	});

	it('says when the days are the wrong way round', () => {
		expect(ask('from=2026-12-02&to=2026-12-01').refused.to).toContain('not before');
	});

	it('ignores a sort, a state, a person and a page that do not exist', () => {
		expect(ask('sort=note;drop&state=open&person=1&page=-4&order=sideways')).toMatchObject({
			sort: 'when',
			descending: true,
			page: 1,
			filter: { person: null, state: null }
		});
	});

	it('sorts other columns upwards unless told', () => {
		expect(ask('sort=wound').descending).toBe(false);
		expect(ask('sort=wound&order=down').descending).toBe(true);
	});
});
