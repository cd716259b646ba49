/**
 * The shapes that winding, server, screen and simulator share. Turns are whole revolutions of the bobbin; times named
 * `…Ms` are milliseconds; wall times are Unix milliseconds, device times are milliseconds since boot, unwrapped.
 */

export const runStates = [
	'waiting',
	'winding',
	'easing',
	'at-look',
	'paused',
	'taking-off',
	'on-count',
	'kept',
	'set-aside'
] as const;
export type RunState = (typeof runStates)[number];

export const questions = ['jump', 'restarted', 'did-you-stop', 'which-winder', 'snapped'] as const;
export type Question = (typeof questions)[number];

export type LinkState = 'live' | 'old' | 'no-signal' | 'never';

/** What the bench tells the maker now. `look-coming` is a sound only. */
export type Cue = 'look-coming' | 'look' | 'ease' | 'stop' | 'over';

/** Which way the wire goes on, seen from the top of the bobbin. */
export type Direction = 'counter-clockwise' | 'clockwise';
/** How the bobbin sits on the winder: its top faces away from the spindle (out) or towards it (in). */
export type TopFaces = 'out' | 'in';

/** What one winder is and how it is set. */
export interface WinderConfig {
	pulsesPerTurn: number;
	/** Highest speed of the spindle in rpm. */
	rpmMax: number;
	/** false: one sensor, everything counts as forward. */
	seesDirection: boolean;
	/** Which way the wire goes on when the spindle turns forward and the bobbin's top faces out. */
	forwardIs: Direction;
	easeEarlyTurns: number;
	stopEarlyTurns: number;
	/** 1 for a real winder; above 1 for speeded-up simulation, whose `t` runs that much faster than the wall clock. */
	timeScale: number;
	/** Keep a coil on count by itself after this long standing still; null: never. */
	keepAfterMs: number | null;
}

/** What to wind: one coil of the queue as the bench takes it. */
export interface CoilPlan {
	coilId: string;
	name: string;
	note: string;
	/** Turns wanted. */
	target: number;
	/** Look interval in turns, 0 for none. */
	lookEvery: number;
	direction: Direction;
	topFaces: TopFaces;
	/** On count within this many turns either side. */
	toleranceTurns: number;
	/** Turns of one early look, 0 for none; null: the usual one on the first coil of a session. */
	firstLook: number | null;
	/** Turns at which the wire reaches the flange; null: not known. */
	fullTurns: number | null;
}

/** The marks at which cues come, in turns of the run; see cues.ts. */
export interface CuePlan {
	target: number;
	lookEvery: number;
	/** One early look on the first coil of a session, 0 for none. */
	firstLook: number;
	easeEarlyTurns: number;
	stopEarlyTurns: number;
	/** The last look mark already dealt with (seen or wound past), 0 before any. */
	lookDone: number;
}

export const lookNotes = ['even', 'high-at-one-side', 'guided-again'] as const;
export type LookNote = (typeof lookNotes)[number];

export interface Look {
	/** The mark it was for, in turns. */
	mark: number;
	/** Turns on the bobbin when the spindle stood for it. */
	turns: number;
	/** null: wound on without a word. */
	note: LookNote | null;
}

export interface Snap {
	/** Turns counted when the maker said so. */
	saidAt: number;
	/** Turns on the bobbin where the wire left. */
	leftAt: number;
	/** Turns the spindle ran on empty. */
	emptyTurns: number;
}

/** Detail of the open question, for the words on the screen. Counts are turns of the run on the bobbin. */
export type QuestionDetail =
	| { kind: 'jump'; keep: number; take: number }
	| { kind: 'restarted'; at: number; uncertainTurns: number | null }
	| { kind: 'did-you-stop'; at: number; rpm: number }
	| { kind: 'which-winder'; otherWinderId: string; otherName: string; turns: number }
	| { kind: 'snapped'; guess: number; counted: number };

/** One meaning each. Every tap has an id made by the screen, so that sending it twice does it once. */
export type TapKind =
	| { kind: 'start' } // waiting: zero is here
	| { kind: 'start-here' } // winding that began by turning: zero is here, not where it moved
	| { kind: 'look'; note: LookNote } // at-look
	| { kind: 'keep' } // on-count or paused, standing still
	| { kind: 'undo' } // kept
	| { kind: 'set-aside'; reason: string }
	| { kind: 'snapped' }
	| { kind: 'snap-at'; turns: number } // answers snapped: wire left at this turn
	| { kind: 'no-snap' } // answers snapped: the wire held
	| { kind: 'taking-off' }
	| { kind: 'taking-off-done' }
	| { kind: 'jump-take' }
	| { kind: 'jump-keep' }
	| { kind: 'go-on' } // answers restarted: go on from the count shown
	| { kind: 'true-count'; turns: number } // answers restarted
	| { kind: 'stopped' } // answers did-you-stop: yes, I stopped
	| { kind: 'not-stopped' } // answers did-you-stop: no; the count is not to be trusted, fix the magnet
	| { kind: 'this-winder' } // answers which-winder: it is wound here
	| { kind: 'other-winder' }; // answers which-winder: it is wound on the other one
export type Tap = TapKind & {
	/** UUID made by the screen at the touch. */
	id: string;
	/** Member who tapped; null for the bench itself (kept by itself). */
	memberId: string | null;
};

export type TapRefusal =
	| 'no-run' // there is no coil on this bench
	| 'turning' // nothing to tap while the spindle turns
	| 'not-now' // that tap has no meaning in this state
	| 'too-late' // undo: ten seconds are over or the next coil turns
	| 'range'; // a typed count outside sense

/** A fact of a run or a winder: something the record keeps. Numbered per winder by the recorder. */
export interface Fact {
	kind: FactKind;
	/** Wall time the fact is placed at, Unix ms. */
	at: number;
	/** Run it belongs to, or null. */
	runId: string | null;
	/** Turns on the bobbin at that moment, or null. */
	turns: number | null;
	/** Small, JSON, specific to the kind. */
	detail: Record<string, string | number | boolean | null>;
	memberId: string | null;
}

export const factKinds = [
	'taken', // the bench took a coil of the queue
	'moved', // began to turn without a start tap
	'started', // start tap
	'started-here',
	'stopped', // stood still
	'went-on',
	'look-due',
	'look-seen', // detail: mark, note
	'look-passed', // wound past without standing still
	'eased', // ease cue came
	'stop-cue',
	'over', // detail: over
	'on-count',
	'taken-back', // detail: turns back, total
	'taking-off',
	'taking-off-done',
	'snapped',
	'snap-placed',
	'no-snap',
	'jumped',
	'jump-taken',
	'jump-kept',
	'jump-gone',
	'restarted', // detail: at, uncertain
	'restart-answered',
	'bridged', // restarted with retained totals
	'pulses-ended', // at speed, without slowing
	'said-stopped',
	'said-not-stopped',
	'which-winder',
	'kept',
	'undone',
	'set-aside',
	'tap-waiting', // a tap waits for the winder's lines
	'event-lost',
	'line-mismatch',
	'buffer-overflow',
	'bouncing',
	'missed-pulses',
	'pulses-per-turn',
	'clock-odd',
	'two-winders',
	'caught-up',
	'wrong-way',
	'signed-off'
] as const;
export type FactKind = (typeof factKinds)[number];

/** Short standing remarks about the winder, shown near. */
export const notices = [
	'bouncing',
	'missed-pulses',
	'pulses-per-turn',
	'clock-odd',
	'two-winders',
	'line-errors',
	'wrong-way',
	'catching-up',
	'signed-off'
] as const;
export type Notice = (typeof notices)[number];

/** The figures of a run as they stand, and as they are kept. */
export interface RunFigures {
	/** Turns counted: sign · (net − baseline), through restarts. */
	turns: number;
	/** Turns that carry wire. */
	onBobbin: number;
	windingMs: number;
	stoppedMs: number;
	/** Mean over the time winding, and the highest, in rpm; 0 before any. */
	rpmMean: number;
	rpmTop: number;
	looks: Look[];
	snaps: Snap[];
	/** Turns taken back or off in all. */
	takenBack: number;
	/** Kinds of faults seen during the run. */
	faults: FactKind[];
}

export interface RunView extends RunFigures {
	runId: string;
	coil: CoilPlan;
	target: number;
	/** target − onBobbin; negative when over. */
	left: number;
	state: RunState;
	question: Question | null;
	questionDetail: QuestionDetail | null;
	cue: Cue | null;
	/** Marks in turns; null when none is ahead. */
	nextLook: number | null;
	easeAt: number;
	stopAt: number;
	firstLook: number;
	/** Began by turning and not yet said otherwise: how many turns ago. null once settled. */
	movedTurnsAgo: number | null;
	/** A tap that waits until the winder's lines reach it. */
	pendingTap: TapKind['kind'] | null;
	startedAt: number | null;
	/** kept: undo is possible until then, null when no more. */
	undoUntil: number | null;
	/** kept: short code to copy on the coil. */
	sticker: string | null;
	setAsideReason: string | null;
}

/** The whole state of one winder and its run, as told to a screen. Each event carries all of it; the newest wins. */
export interface LiveView {
	/** Rises with every change within one server start; a screen drops what is older. */
	seq: number;
	/** Differs at each server start. */
	server: string;
	/** Server time this was made, Unix ms. */
	at: number;
	winderId: string;
	winderName: string;
	seesDirection: boolean;
	boot: string | null;
	forward: number;
	reverse: number;
	net: number;
	/** Signed. */
	rpm: number;
	turning: boolean;
	/** Age of the last line when this was made; null when never. */
	ageMs: number | null;
	link: LinkState;
	notices: Notice[];
	/** Taps and facts not yet on disk; above 0 the screen says so. */
	unsaved: number;
	/** false: "counting, not saving". */
	saving: boolean;
	run: RunView | null;
	/** The run kept or set aside before this one, so that its sticker line stands until the next coil turns. */
	last: {
		runId: string;
		name: string;
		state: 'kept' | 'set-aside';
		onBobbin: number;
		sticker: string;
		direction: Direction;
		startedAt: number | null;
		endedAt: number | null;
	} | null;
	next: { name: string; target: number } | null;
	waiting: number;
	/** Time scale of a simulated winder, 1 for a real one. */
	timeScale: number;
}
