/** What was said between host and winder, line by line: all that the rules look at. */

/** Why the host sent a line, where its text alone does not tell. */
export type Probe =
	| 'unknown-key'
	| 'unknown-verb'
	| 'overtaken'
	/** With a wrong checksum or none. */
	| 'spoilt'
	/** Longer than a line may be, or with a byte over 7F. */
	| 'dropped'
	/** The question directly behind such a line. */
	| 'after-dropped';

export interface Entry {
	/** Number in the record, from 1. */
	no: number;
	/** The winder's own time where it is told its time, else the host's; from the start of the session. */
	atMs: number;
	/** `link`: a link that the winder knows to be new came up. `cable`: one it cannot tell came up. `note`: what a person was asked. */
	from: 'winder' | 'host' | 'link' | 'cable' | 'note';
	text: string;
	probe?: Probe;
	/** A line of the winder that was dropped before it could be read. */
	dropped?: 'too-long' | 'not-ascii';
}

export interface Session {
	entries: readonly Entry[];
	/** When the host stopped listening: what was not said until then may still have come. */
	endedMs: number;
}

const arrows = { winder: '→', host: '←', link: '=', cable: '=', note: '#' };

/** A line of the record as a person reads it. Bytes that are no visible ASCII are shown as ·. */
export function entryText({ no, atMs, from, text, dropped }: Entry): string {
	const shown = dropped ? `(a line ${dropped === 'too-long' ? 'too long' : 'with bytes that are no ASCII'})` : text;
	const visible = from === 'winder' || from === 'host' ? shown.replace(/[^ -~]/g, '·') : shown;
	return `${String(no).padStart(4)} ${(atMs / 1000).toFixed(3).padStart(8)} s ${arrows[from]} ${visible}`;
}
