/** What the bench book can be asked for, shared by its address, its page and its query. */

export const bookStates = ['kept', 'set-aside'] as const;
export type BookState = (typeof bookStates)[number];

export const bookSorts = [
	'when',
	'coil',
	'winder',
	'wanted',
	'wound',
	'off',
	'winding',
	'stopped',
	'rpm',
	'measured',
	'who',
	'state'
] as const;
export type BookSort = (typeof bookSorts)[number];

export type BookTerm =
	/** Stands in the coil's name, the sticker, the note or the reason, whatever its case. */
	| { kind: 'word'; text: string }
	/** Turns on the bobbin from … to, both included. */
	| { kind: 'turns'; from: number; to: number }
	/** Turns on the bobbin or wanted, or a word. `text` is the number as typed. */
	| { kind: 'number'; value: number; text: string };

export interface BookFilter {
	/** All must hold. */
	terms: BookTerm[];
	/** Days in the workshop's zone, YYYY-MM-DD, both included; null for no bound. */
	from: string | null;
	to: string | null;
	/** A member's id, `itself` for runs the bench kept by itself, null for anyone. */
	person: string | null;
	state: BookState | null;
}

export const wholeBook: BookFilter = { terms: [], from: null, to: null, person: null, state: null };
