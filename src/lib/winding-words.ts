import { turnsText, wholeText } from './format.ts';
import type {
	Direction,
	FactKind,
	LinkState,
	LookNote,
	Notice,
	Question,
	RunState,
	TopFaces
} from './winding/types.ts';

/**
 * The plain words for everything the record and the pages say about a winder and its coil. One place, complete by type:
 * a new kind of fact does not compile until it has its words.
 */

/** What a fact carries when it is told, from the record or live. */
export interface ToldFact {
	turns: number | null;
	detail: Readonly<Record<string, string | number | boolean | null>>;
}

/** A whole number of the detail, or null. */
function count(fact: ToldFact, key: string): number | null {
	const value = fact.detail[key];
	return typeof value === 'number' && Number.isFinite(value) ? value : null;
}

function word(fact: ToldFact, key: string): string | null {
	const value = fact.detail[key];
	return typeof value === 'string' && value !== '' ? value : null;
}

/** "text 12 turns more" only when the number is known. */
function withTurns(before: string, turns: number | null, after = ''): string {
	return turns === null ? before : `${before} ${turnsText(turns)}${after}`;
}

const lookWords: Record<LookNote, string> = {
	even: 'looks even',
	'high-at-one-side': 'high at one side',
	'guided-again': 'guided again'
};

/** The maker's word on a look; null when the winder went on without one. */
export function lookNoteText(note: LookNote | null): string {
	return note === null ? 'wound on without a word' : lookWords[note];
}

function knownLookNote(text: string | null): LookNote | null {
	return text !== null && text in lookWords ? (text as LookNote) : null;
}

const factWords: Record<FactKind, (fact: ToldFact) => string> = {
	taken: () => 'The bench took this coil',
	moved: () => 'Began to turn',
	started: () => 'Started',
	'started-here': () => 'Zero set here instead',
	stopped: () => 'Stood still',
	'went-on': () => 'Went on',
	'look-due': (fact) => withTurns('Look cue for', count(fact, 'mark')),
	'look-seen': (fact) => {
		const note = knownLookNote(word(fact, 'note'));
		const mark = count(fact, 'mark');
		const at = mark === null ? 'Look' : `Look for ${wholeText(mark)}`;
		return `${at}: ${lookNoteText(note)}`;
	},
	'look-passed': (fact) => {
		const mark = count(fact, 'mark');
		return mark === null
			? 'A look passed without standing still'
			: `Look for ${wholeText(mark)} passed without standing still`;
	},
	eased: () => 'Ease off cue',
	'stop-cue': () => 'Stop cue',
	over: (fact) => {
		const over = count(fact, 'over');
		return over === null ? 'Went over the target' : `Went over the target by ${wholeText(over)}`;
	},
	'on-count': () => 'On count',
	'taken-back': (fact) => withTurns('Taken back', count(fact, 'turns')),
	'taking-off': () => 'Taking off: turns from here are subtracted',
	'taking-off-done': () => 'Taking off ended: turns count up again',
	snapped: () => 'Wire snapped',
	'snap-placed': (fact) => withTurns('Wire left the bobbin at', count(fact, 'leftAt')),
	'no-snap': () => 'The wire had held after all',
	jumped: (fact) => {
		const take = count(fact, 'take');
		return take === null
			? 'The count jumped; the total before it was held'
			: `The count jumped to ${wholeText(take)}; the total before it was held`;
	},
	'jump-taken': (fact) => withTurns('The new count was taken:', fact.turns),
	'jump-kept': (fact) => withTurns('The count before the jump was kept:', fact.turns),
	'jump-gone': () => 'The jump went away by itself; nothing was taken from it',
	restarted: (fact) => {
		const uncertain = count(fact, 'uncertain');
		if (uncertain === null) return 'The winder restarted; how many turns it missed cannot be known';
		return `The winder restarted; up to ${turnsText(uncertain)} uncertain`;
	},
	'restart-answered': (fact) =>
		word(fact, 'answer') === 'true-count'
			? withTurns('The true count was typed:', count(fact, 'turns'))
			: withTurns('After the restart the count went on from', fact.turns),
	bridged: () => 'The winder restarted and kept its totals; no turn was lost',
	'pulses-ended': (fact) => {
		const rpm = count(fact, 'rpm');
		const at = rpm === null ? 'speed' : `${wholeText(Math.abs(rpm))} rpm`;
		return `Pulses ended at ${at}: the spindle stopped, or the sensor lost its magnet`;
	},
	'said-stopped': () => 'Answered: the spindle had stopped',
	'said-not-stopped': () => 'Answered: it had not stopped; the count from here is not to be trusted',
	'which-winder': (fact) => {
		const answer = word(fact, 'answer');
		if (answer === 'this-winder') return 'Answered: it is wound on this winder';
		if (answer === 'other-winder') return 'Answered: it is wound on the other winder';
		const other = word(fact, 'other');
		return other ? `Another winder turned as well: ${other}` : 'Another winder turned as well';
	},
	kept: (fact) => withTurns('Kept with', fact.turns),
	undone: (fact) => {
		const was = word(fact, 'was') ?? word(fact, 'tap');
		if (was === 'kept' || was === 'keep') return 'Undone: not kept after all';
		return was === 'set-aside' ? 'Undone: not set aside after all' : 'Undone';
	},
	'set-aside': (fact) => {
		const reason = word(fact, 'reason');
		return reason ? `Set aside: ${reason}` : 'Set aside';
	},
	'tap-waiting': () => 'A tap waited for the winder’s lines',
	'event-lost': () => 'An event of the winder was lost; the count is not affected',
	'line-mismatch': () => 'A line came twice with different content; the first was kept',
	'buffer-overflow': () => 'The winder’s memory was full: the count is exact, some detail of speed is missing',
	bouncing: () => 'The sensor bounced; the count is not affected',
	'missed-pulses': (fact) => withTurns('Turns may have been missed:', count(fact, 'missed')),
	'pulses-per-turn': () => 'Speed and count did not agree: two pulses a turn?',
	'clock-odd': () => 'The winder’s clock ran fast or slow; the count is right, speeds are not to be relied on',
	'two-winders': () => 'Two winders share this name',
	'caught-up': () => 'Lines that had waited arrived; the count caught up',
	'wrong-way': () => 'The spindle turned the other way than this coil asks for',
	'signed-off': () => 'The winder signed off'
};

export function factText(kind: string, fact: ToldFact): string {
	// A record may hold a kind that a later version wrote; its name is better than nothing.
	return kind in factWords ? factWords[kind as FactKind](fact) : kind.replaceAll('-', ' ');
}

/** A spindle rocked at the start stands and goes on within this; no hand has done anything meanwhile. */
const rockingMsMax = 2_000;
/** Lines lag behind every tap a little; a longer wait is worth a word. */
const tapWaitMsMin = 3_000;

interface RecordedFact extends ToldFact {
	kind: string;
	at: Date;
}

/**
 * The facts of a run worth reading, in order: without standing still and going on at the same place within two seconds, and
 * without taps that waited for no longer than lines always take. The record itself keeps them all.
 */
export function factsWorthTelling<Told extends RecordedFact>(facts: readonly Told[]): Told[] {
	return facts.filter((fact, i) => {
		const [before, after] = [facts[i - 1], facts[i + 1]];
		if (fact.kind === 'stopped') return !(after && isRocking(fact, after));
		if (fact.kind === 'went-on') return !(before && isRocking(before, fact));
		return fact.kind !== 'tap-waiting' || waitedLong(fact, facts.slice(i + 1));
	});
}

function isRocking(stood: RecordedFact, went: RecordedFact): boolean {
	return (
		stood.kind === 'stopped' &&
		went.kind === 'went-on' &&
		stood.turns === went.turns &&
		went.at.getTime() - stood.at.getTime() <= rockingMsMax
	);
}

/** A tap's own fact stands at the moment of the tap: how long it waited shows in what was recorded until then. */
function waitedLong(tap: RecordedFact, later: readonly RecordedFact[]): boolean {
	const closes = ({ kind }: RecordedFact) => kind === 'kept' || kind === 'set-aside';
	const closing = ['keep', 'set-aside'].includes(word(tap, 'tap') ?? '') ? later.findIndex(closes) : 0;
	if (closing < 0 || later.length === 0) return true;
	const meanwhile = later.slice(0, closing + 1);
	const next = later[closing + 1];
	// Lines that come late settle the tap, and that they came is recorded right after.
	if (next?.kind === 'caught-up') meanwhile.push(next);
	return meanwhile.some(({ at }) => at.getTime() - tap.at.getTime() > tapWaitMsMin);
}

/** Faults seen during a run, short, for a list. */
export function faultText(kind: string): string {
	return factText(kind, { turns: null, detail: {} });
}

const runStateWords: Record<RunState, string> = {
	waiting: 'waiting to start',
	winding: 'winding',
	easing: 'easing off',
	'at-look': 'at a look',
	paused: 'paused',
	'taking-off': 'taking off',
	'on-count': 'on count',
	kept: 'kept',
	'set-aside': 'set aside'
};

export function runStateText(state: RunState): string {
	return runStateWords[state];
}

const questionWords: Record<Question, string> = {
	jump: 'asks: the count jumped',
	restarted: 'asks: the winder restarted',
	'did-you-stop': 'asks: did you stop?',
	'which-winder': 'asks: which winder?',
	snapped: 'asks: where did the wire leave?'
};

export function questionText(question: Question): string {
	return questionWords[question];
}

const linkWords: Record<LinkState, string> = {
	live: 'live',
	old: 'old',
	'no-signal': 'no signal',
	never: 'never linked'
};

/** @param ageMs of the last line, told with an old link; null where it stands beside anyway */
export function linkText(link: LinkState, ageMs: number | null = null): string {
	if (link !== 'old' || ageMs === null) return linkWords[link];
	return `${linkWords.old}: last line ${wholeText(ageMs / 1000)} s ago`;
}

const noticeWords: Record<Notice, string> = {
	bouncing: 'The sensor is bouncing. The count is not affected.',
	'missed-pulses': 'Turns may have been missed. They are not added to the count.',
	'pulses-per-turn': 'Speed and count do not agree: two pulses a turn? Use the count check.',
	'clock-odd': 'The winder’s clock runs fast or slow: the count is right, the speed is not to be relied on.',
	'two-winders': 'Two winders share this name. Give each its own link key.',
	'line-errors': 'More than 1 in 100 lines arrive damaged. Look at the cable or the radio.',
	'wrong-way': 'The spindle turns the other way than the coil asks for.',
	'signed-off': 'The winder has signed off: it was switched off in order.',
	'catching-up': 'Lines that waited are arriving.'
};

export function noticeText(notice: Notice): string {
	return noticeWords[notice];
}

/** "counter-clockwise ↺": always the wire as seen from the top of the bobbin. */
export function directionText(direction: Direction): string {
	return direction === 'clockwise' ? 'clockwise ↻' : 'counter-clockwise ↺';
}

/** Both directions as a form offers them. */
export const directionOptions = (['counter-clockwise', 'clockwise'] as const).map((value) => ({
	value,
	label: directionText(value)
}));

/** The whole sentence, so that nobody has to guess from which end. */
export function directionSentence(direction: Direction, topFaces: TopFaces): string {
	return `Seen from the top of the bobbin, the wire goes on ${directionText(direction)}. Top faces ${topFaces}.`;
}

/** "12 over", "2 short", "on count". */
export function offSentence(off: number): string {
	if (off === 0) return 'on the mark';
	return off > 0 ? `${wholeText(off)} over` : `${wholeText(-off)} short`;
}
