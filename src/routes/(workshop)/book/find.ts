import { typedDay, typedLine, typedWhole } from '../../../lib/typed-values.ts';
import { bookSorts, bookStates, type BookFilter, type BookSort, type BookTerm } from '../../../lib/book-filter.ts';

/** Longer than any name with a note's worth of words; a longer text is cut, and the field says so by its own limit. */
export const findCharactersMax = 200;

/** More words than anybody types; each costs a comparison in every row. */
const termsMax = 8;

const digits = String.raw`\d{1,3}(?:[,.'’ \u00a0\u2009\u202f]\d{3})+|\d{1,9}`;
const alone = (inner: string) => String.raw`(?<![\p{L}\p{N}\-])${inner}(?![\p{L}\p{N}\-])`;
const spread = new RegExp(alone(String.raw`(${digits})\s*(?:±|\+\s*/?\s*[-−])\s*(${digits})(?:\s*turns?)?`), 'gu');
const span = new RegExp(alone(String.raw`(${digits})\s*(?:to|–)\s*(${digits})(?:\s*turns?)?`), 'gu');
const turns = new RegExp(alone(String.raw`(${digits})(?:\s*turns?)?`), 'gu');
const phrase = /"([^"]+)"/gu;

/**
 * What somebody types to find a run: words of the name, sticker, note or reason, a phrase in quotes, a number of turns, a
 * number with its spread ("5,300 ± 100", "5300 +/- 100") or a span ("5,200 to 5,400"). All must hold.
 */
export function parseFind(typed: string): BookTerm[] {
	const terms: BookTerm[] = [];
	let rest = typedLine(typed.slice(0, findCharactersMax));
	const take = (pattern: RegExp, make: (...groups: string[]) => BookTerm | null) => {
		rest = rest.replace(pattern, (whole: string, ...found: unknown[]) => {
			const groups = found.filter((value): value is string => typeof value === 'string').slice(0, -1);
			const term = make(...groups, whole);
			if (!term) return whole;
			terms.push(term);
			return ' ';
		});
	};
	take(phrase, (text = '') => (text.trim() ? { kind: 'word', text: text.trim() } : null));
	take(spread, (middle = '', either = '') => {
		const [at, by] = [typedWhole(middle), typedWhole(either)];
		return at === null || by === null ? null : { kind: 'turns', from: at - by, to: at + by };
	});
	take(span, (low = '', high = '') => {
		const [from, to] = [typedWhole(low), typedWhole(high)];
		return from === null || to === null || from > to ? null : { kind: 'turns', from, to };
	});
	take(turns, (number = '', whole = '') => {
		const value = typedWhole(number);
		if (value === null) return null;
		// "240 turns" can only be a count; "240" may also be part of a name or a sticker.
		return /turns?$/.test(whole) ? { kind: 'turns', from: value, to: value } : { kind: 'number', value, text: number };
	});
	for (const word of rest.split(/[\s,;]+/)) {
		if (word && word !== '·') terms.push({ kind: 'word', text: word });
	}
	return terms.slice(0, termsMax);
}

export interface BookQuery {
	filter: BookFilter;
	sort: BookSort;
	descending: boolean;
	/** From 1. */
	page: number;
	/** As typed, to stand in the fields again. */
	typed: { find: string; from: string; to: string; person: string; state: string };
	refused: { from?: string; to?: string };
}

const uuid = /^[0-9a-f]{8}-(?:[0-9a-f]{4}-){3}[0-9a-f]{12}$/;

/** What the address of the bench book asks for. What cannot be read is left out of the filter and named. */
export function parseBookQuery(params: URLSearchParams): BookQuery {
	const typed = {
		find: params.get('find')?.slice(0, findCharactersMax) ?? '',
		from: params.get('from') ?? '',
		to: params.get('to') ?? '',
		person: params.get('person') ?? '',
		state: params.get('state') ?? ''
	};
	const from = typedDay(typed.from);
	const to = typedDay(typed.to);
	const refused: BookQuery['refused'] = {};
	const day = (text: string) => `From: a day like 2026-12-01, from 2000 on. “${text.slice(0, 30)}” was left out.`;
	if (typed.from && !from) refused.from = day(typed.from);
	if (typed.to && !to) refused.to = day(typed.to).replace('From', 'To');
	if (from && to && from > to) refused.to = 'To: not before From. Nothing lies between them.';
	const person = typed.person === 'itself' || uuid.test(typed.person) ? typed.person : null;
	const state = bookStates.find((known) => known === typed.state) ?? null;
	const sort = bookSorts.find((known) => known === params.get('sort')) ?? 'when';
	const order = params.get('order');
	const page = typedWhole(params.get('page') ?? '1') ?? 1;
	return {
		filter: { terms: parseFind(typed.find), from, to, person, state },
		sort,
		descending: order === 'down' || (order !== 'up' && sort === 'when'),
		// A page number past any book; the list itself says when a page holds nothing.
		page: Math.min(Math.max(page, 1), 1_000_000),
		typed,
		refused
	};
}
