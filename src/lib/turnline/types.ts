/**
 * The typed form of Turnline 1, the text line between a winder and Turnstead (firmware-protocol/PROTOCOL.md is normative).
 * Key names are the protocol's own short keys, so that a line and its type can be read side by side.
 */

/** Kinds of event this version gives a meaning to. */
export const eventKinds = ['go', 'stop', 'rev', 'ease', 'look', 'at', 'over', 'btn', 'bufov'] as const;
export type EventKind = (typeof eventKinds)[number];

/** What every line that carries a count has. */
export interface Totals {
	/** Boot id: 8 hex digits, upper case. */
	b: string;
	/** Number of the kept line in this boot (in `HI`: the last number used). */
	n: number;
	/** Number of the last event so far in this boot; on `E` its own. */
	e: number;
	/** Forward turns since boot. */
	f: number;
	/** Reverse turns since boot. */
	v: number;
	/** Device milliseconds since boot, u32, wraps. */
	t: number;
}

/** Birth of a boot, and the first line at every new link: the totals of now. */
export interface Hi extends Totals {
	verb: 'HI';
	p: number;
	dev: string;
	fw?: string;
	r?: number;
	ppr?: number;
	dir?: 0 | 1;
	rep?: number;
	buf?: number;
	/** Totals continued through resets: the last boot the host acknowledged, and its totals now. All three or none. */
	pb?: string;
	pf?: number;
	pv?: number;
}

export interface Tick extends Totals {
	verb: 'T';
	/** Signed revolutions a minute, 0 when stopped. */
	r: number;
	/** Refused (bouncing) pulses since boot. */
	x?: number;
	/** Suspected missed pulses since boot, never part of the count. */
	g?: number;
}

export interface Event extends Totals {
	verb: 'E';
	/**
	 * One of `eventKinds`, or a word this version does not know: still an event with totals, kept and acknowledged, since a
	 * refused one would hold back every later acknowledgement of that boot.
	 */
	k: string;
	r?: number;
	x?: number;
	g?: number;
}

interface AnswerAs<V extends string> {
	verb: V;
	b: string;
	/** The command answered; absent on a NO to something that had no id. */
	id?: number;
	why?: string;
}
export type Answer = AnswerAs<'OK'> | AnswerAs<'NO'>;

export interface Bye {
	verb: 'BYE';
	b?: string;
}

export type DeviceLine = Hi | Tick | Event | Answer | Bye;

/** Ask for a `HI` with the totals of now, at once. */
export interface Ask {
	verb: '?';
}

export interface SetPlan {
	verb: 'SET';
	id: number;
	b: string;
	/** Absolute target in net turns of that boot; 0 < |tgt − from|. */
	tgt: number;
	/** Interval of looks in turns, 0 for none, counted from `from`. */
	look: number;
	/** Turns early for the two cues. */
	ease: number;
	stop: number;
	/** Absolute net turns of that boot where this coil's zero lies; 0 when absent. */
	from?: number;
	/** Turns from zero of one early look, 0 or absent for none. */
	fst?: number;
}

export interface StopAsk {
	verb: 'STOP';
	id?: number;
	b?: string;
}
export interface Ack {
	verb: 'ACK';
	b: string;
	n: number;
	e: number;
}
export interface Sync {
	verb: 'SYNC';
	b: string;
	/** Send again the events after this one. */
	e: number;
}
export interface Hold {
	verb: 'HOLD';
	ms: number;
}
export interface Time {
	verb: 'TIME';
	/** Unix time in seconds. */
	u: number;
}

export type HostLine = Ask | SetPlan | StopAsk | Ack | Sync | Hold | Time;
export type Line = DeviceLine | HostLine;

/** Why a line is refused; each has a plain sentence in `refusalText`. */
export const refusals = [
	'too-long',
	'not-ascii',
	'form',
	'no-checksum',
	'checksum',
	'checksum-xmodem',
	'checksum-kermit',
	'verb',
	'duplicate-key',
	'missing-key',
	'range'
] as const;
export type Refusal = (typeof refusals)[number];

export type Parsed<L = Line> =
	| { ok: true; line: L }
	| { ok: true; line: null } // an empty line or a comment
	| {
			ok: false;
			why: Refusal;
			/** The key at fault, where one is. */
			key?: string;
			/** Kept so that an unknown verb can be answered `NO b=… why=verb`. */
			verb?: string;
	  };
