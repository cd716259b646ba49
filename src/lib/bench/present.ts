import { durationText, turnsText, wallTime, wholeText } from '../format.ts';
import { directionText } from '../winding-words.ts';
import { linkStateOf } from '../winding/link.ts';
import type { Direction, LinkState, LiveView, Notice, QuestionDetail, RunView, TapKind } from '../winding/types.ts';

/** Own ground, word, shape and sound for each state: colour never speaks alone. */
export type Ground = 'plain' | 'ease' | 'look' | 'stop' | 'mark' | 'no-signal';
export type Shape =
	| 'bobbin-empty'
	| 'bobbin'
	| 'bobbin-resting'
	| 'bobbin-unwinding'
	| 'falling-bars'
	| 'eye'
	| 'bar'
	| 'tick'
	| 'tag'
	| 'tag-aside'
	| 'fork'
	| 'door'
	| 'broken-line';

/** What the maker is asked by the screen itself, one step before a tap is made. */
export type Asking = 'set-aside' | 'true-count' | null;

/** Reasons offered for setting a coil aside: no text box stands on the bench. */
export const setAsideReasons = ['wire snapped', 'wound unevenly', 'wrong wire or bobbin', 'only a trial'] as const;

export type Act =
	| { do: 'tap'; tap: TapKind }
	| { do: 'ask'; asking: Asking }
	| { do: 'step'; by: number }
	| { do: 'heard'; yes: boolean }
	| { do: 'go'; href: string }
	| { do: 'screen' };

export interface BenchTap {
	/** Stable within a state, so that a button is not replaced under the finger. */
	key: string;
	label: string;
	/** The one meaning of the state stands large; what is rarer stands small beside it. */
	size: 'main' | 'small';
	act: Act;
	enabled: boolean;
}

/** A count to step or type: where the wire left, or the true count after a restart. */
export interface CountEntry {
	label: string;
	value: number;
	min: number;
	max: number;
	confirm: string;
	tap: 'snap-at' | 'true-count';
}

/** What sounds, as a state; the player makes edges and rhythms of it. */
export interface SoundNow {
	cue: 'quiet' | 'look-coming' | 'look' | 'ease' | 'stop' | 'over' | 'no-signal';
	/** Differs whenever the same cue comes anew. */
	key: string;
	/** ease: how near the stop is, 0 at its beginning, 1 at the stop. */
	nearness: number;
	/** over: turns beyond the target. */
	over: number;
}

export interface BenchModel {
	ground: Ground;
	shape: Shape;
	word: string;
	/** Beside the word, in the same size: what is left, or the age of what is shown. */
	beside: string;
	/** null: there is no coil to count for. */
	count: string | null;
	/** The count is not of now: it is drawn as old, with a hatch. */
	old: boolean;
	name: string;
	/** After the name: what it is to become. */
	goal: string;
	/** Time spent winding; before the start the note that came with the coil. */
	clock: string;
	speed: string;
	/** State of the link in a word, for beside the winder's name. */
	link: string;
	/** Next mark, or what to do to go on. */
	ahead: string;
	winder: string;
	/** Remarks, most pressing first. */
	messages: string[];
	/** Below the word where there is no count, or a question in full. */
	text: string | null;
	/** Before a coil is started: how the wire is to go on. */
	setUp: string | null;
	taps: BenchTap[];
	entry: CountEntry | null;
	/** What the one key or pedal does now, and what holding it does. */
	pedal: BenchTap | null;
	pedalHeld: BenchTap | null;
	/** Height of the winding, as a part of the flanges': 0 to 1, and no further however much is wound. */
	copper: number;
	/** Heights of the looks' marks and of the target's, likewise. */
	marks: number[];
	target: number;
	/** Read out politely and at once; change only with the state, never with the count. */
	status: string;
	alert: string;
	sound: SoundNow;
	/** The spindle is not known to turn: controls that are not taps may show. */
	standing: boolean;
	/** For the tab while another one is in front. */
	title: string;
	/** Digits the size of the count has to allow for. */
	digits: number;
}

export interface PresentOptions {
	timeZone: string;
	/** How long before its arrival the view was made, in ms. */
	madeBeforeMs: number;
	/** How much later than usual the last beat came, in ms. */
	delayMs: number;
	/** Since anything came down the stream, in ms. */
	silenceMs: number;
	/** false: the stream is down and being rebuilt. */
	streaming: boolean;
	/** The page was hidden or the tablet slept; nothing has come since. */
	unsure: boolean;
	access: 'ok' | 'signed-out' | 'not-allowed' | 'gone';
	/** Taps made here that the server has not answered. */
	waitingTaps: readonly TapKind['kind'][];
	/** Age of the oldest of them. */
	waitingMs: number;
	/** The plain reason a tap was refused, for a while. */
	refusal: string | null;
	asking: Asking;
	/** The count being stepped or typed, null: not touched. */
	entered: number | null;
	/** Monotonic ms at which this screen first showed the run as kept. */
	keptSeenAtMs: number | null;
	/** Lines that had been missing have come, a moment ago. */
	caughtUp: boolean;
	sound: 'asleep' | 'ask' | 'on' | 'screen-only';
	/** Cues that came while nobody could see or hear them. */
	missed: readonly string[];
	/** false: the screen may go dark by itself. */
	awake: boolean;
}

export const quietOptions: PresentOptions = {
	timeZone: 'UTC',
	madeBeforeMs: 0,
	delayMs: 0,
	silenceMs: 0,
	streaming: true,
	unsure: false,
	access: 'ok',
	waitingTaps: [],
	waitingMs: 0,
	refusal: null,
	asking: null,
	entered: null,
	keptSeenAtMs: null,
	caughtUp: false,
	sound: 'on',
	missed: [],
	awake: true
};

/** Beside the tap that starts a coil, in short; the screen's own sheet has it in full. */
export const startCaution = 'Stop it before reaching in. The cue is no emergency stop.';

/** A double tap on "Keep this coil" must not land on Undo. */
export const undoAfterMs = 1_000;
/** Below this a tap on its way is no news. */
const waitingShownAfterMs = 400;
/** The server sends a beat every 2 s; what is later than this was held up. */
const silenceShownAfterMs = 2_600;
const delayShownAfterMs = 1_000;
/** Most look marks on the whole flange; more would run together. */
const marksMax = 60;
/** Where nobody knows how much the bobbin holds: so far below the top that what is over can still be seen rising. */
const targetAtUnknown = 0.93;

const noticeText: Record<Notice, string> = {
	bouncing: 'sensor is bouncing',
	'missed-pulses': 'possible missed turns',
	'pulses-per-turn': 'two pulses a turn?',
	'clock-odd': 'speed reading unreliable',
	'two-winders': 'two winders share the name',
	'line-errors': 'lines arrive damaged',
	'wrong-way': 'turning the wrong way',
	'catching-up': 'catching up',
	'signed-off': 'winder signed off'
};

/** "0:04 ago", "12:34 ago", "3 h ago": an age that fits beside a word. */
export function ageText(ms: number): string {
	return ms < 3_600_000 ? `${durationText(Math.floor(ms / 1000) * 1000)} ago` : `${Math.floor(ms / 3_600_000)} h ago`;
}

const tenths = (ms: number) => `${(Math.floor(ms / 100) / 10).toFixed(1)} s`;

const hourMinute = (at: number, timeZone: string) => {
	const { hour, minute } = wallTime(at, timeZone);
	return `${String(hour).padStart(2, '0')}:${String(minute).padStart(2, '0')}`;
};

const tap = (label: string, size: BenchTap['size'], kind: TapKind): BenchTap => ({
	key: kind.kind === 'look' ? `look-${kind.note}` : kind.kind === 'set-aside' ? `aside-${kind.reason}` : kind.kind,
	label,
	size,
	act: { do: 'tap', tap: kind },
	enabled: true
});
const ask = (label: string, size: BenchTap['size'], asking: Asking): BenchTap => ({
	key: `ask-${asking ?? 'back'}`,
	label,
	size,
	act: { do: 'ask', asking },
	enabled: true
});
const go = (label: string, size: BenchTap['size'], href: string): BenchTap => ({
	key: `go-${href}`,
	label,
	size,
	act: { do: 'go', href },
	enabled: true
});

const screenTap: BenchTap = {
	key: 'screen',
	label: 'Screen, sound',
	size: 'small',
	act: { do: 'screen' },
	enabled: true
};
const queueTap = go('To the queue', 'small', '/wind');
const snappedTap = tap('wire snapped', 'small', { kind: 'snapped' });
const takingOffTap = tap('taking off', 'small', { kind: 'taking-off' });
const keepAsIsTap = tap('Keep as it is', 'small', { kind: 'keep' });

/** What the state of the run says by itself, before link, question and taps in waiting are looked at. */
interface Face {
	ground: Ground;
	shape: Shape;
	word: string;
	beside: string;
	ahead: string;
	text: string | null;
	taps: BenchTap[];
	entry: CountEntry | null;
	pedal: BenchTap | null;
	pedalHeld: BenchTap | null;
	status: string;
	alert: string;
}

const face = (part: Partial<Face> & Pick<Face, 'ground' | 'shape' | 'word'>): Face => ({
	beside: '',
	ahead: '',
	text: null,
	taps: [],
	entry: null,
	pedal: null,
	pedalHeld: null,
	status: '',
	alert: '',
	...part
});

/**
 * Everything the bench shows, from the newest state and how old it is.
 *
 * @param view the newest live state
 * @param nowMs monotonic ms of the browser
 * @param receivedAtMs monotonic ms at which the view came
 */
export function present(
	view: LiveView,
	nowMs: number,
	receivedAtMs: number,
	options: PresentOptions = quietOptions
): BenchModel {
	const sinceMs = Math.max(0, nowMs - receivedAtMs);
	const ageMs = view.ageMs === null ? null : view.ageMs + options.madeBeforeMs + sinceMs;
	const run = view.run;
	const link = linkNow(view, ageMs, options.unsure);
	const lost = link === 'no-signal' || link === 'never';
	const old = lost || link === 'old';
	// A spindle that was turning when the lines ended may have stopped since: its taps must be within reach then.
	const turning = view.turning && !lost;
	const counting = run !== null && run.startedAt !== null && run.state !== 'kept' && run.state !== 'set-aside';

	const lostWord = view.notices.includes('signed-off') ? 'Signed off' : 'No signal';

	let shown = faceOf(view, run, turning, view.turning && lost, nowMs, sinceMs, options);
	if (counting && lost) {
		const question = run.question !== null;
		shown = {
			...shown,
			ground: 'no-signal',
			shape: 'broken-line',
			word: question ? shown.word : lostWord,
			beside: ageMs === null ? '' : ageText(ageMs),
			status: question ? shown.status : lostWord,
			alert: ''
		};
	} else if (counting && old) {
		shown = {
			...shown,
			ground: shown.ground === 'plain' ? 'no-signal' : shown.ground,
			beside: ageMs === null ? shown.beside : `${tenths(ageMs)} ago`
		};
	}

	shown = withAccess(withWaitingTaps(shown, run, options), view, options, turning, counting ? ageMs : null);
	let asksSound = false;
	if (!turning && options.access === 'ok') {
		// Asked once, after the first tap has played the test sound; an answer the maker owes the coil goes first, and so
		// does Undo, which does not wait.
		const free = run?.question == null && run?.state !== 'kept' && options.asking === null;
		asksSound = options.sound === 'ask' && free;
		// Beside answers there is nothing else to touch.
		const asking = run?.question != null || options.asking !== null;
		if (asksSound) shown = withSoundQuestion(shown);
		else if (!asking) shown = { ...shown, taps: [...shown.taps, screenTap] };
	}

	const messages = messagesOf(view, run, ageMs, link, turning, options);
	if (asksSound) messages.unshift(soundQuestion);
	const windingMs = run ? run.windingMs + (view.turning && link === 'live' ? sinceMs * view.timeScale : 0) : 0;
	const count = run ? run.onBobbin : null;
	return {
		...shown,
		count: count === null ? null : wholeText(count),
		old: counting && (old || options.access !== 'ok'),
		name: run?.coil.name ?? '',
		goal: run ? turnsText(run.target) : '',
		clock: !run
			? ''
			: run.startedAt === null
				? run.coil.note
				: `winding ${durationText(Math.floor(windingMs / 1000) * 1000)}`,
		setUp:
			run?.state === 'waiting'
				? `Seen from the top: ${directionText(run.coil.direction)}. Top faces ${run.coil.topFaces}.`
				: null,
		speed: speedText(view, lost),
		link: options.access !== 'ok' ? '' : view.notices.includes('signed-off') ? 'signed off' : linkWords[link],
		winder: view.winderName,
		messages,
		copper: run ? heightAt(run, run.onBobbin) : 0,
		marks: run ? marksOf(run) : [],
		target: run ? heightAt(run, run.target) : targetAtUnknown,
		sound: soundOf(view, run, link),
		standing: !turning,
		title: `${shown.word}${count === null ? '' : ` ${wholeText(count)}`} · ${view.winderName} · Turnstead`,
		digits: run ? Math.max(String(run.target).length, String(Math.abs(run.onBobbin)).length, 4) : 4
	};
}

const linkWords: Record<LinkState, string> = {
	live: 'live',
	old: 'old',
	'no-signal': 'no signal',
	never: 'not heard yet'
};

function linkNow(view: LiveView, ageMs: number | null, unsure: boolean): LinkState {
	// It said itself that no more will come, however young its last line is.
	if (view.notices.includes('signed-off')) return 'no-signal';
	const link = linkStateOf(ageMs, view.turning);
	return unsure && link === 'live' ? 'old' : link;
}

function speedText(view: LiveView, lost: boolean): string {
	if (lost) return '';
	return view.turning ? `${wholeText(Math.abs(view.rpm))} rpm` : 'stopped';
}

const leftText = (run: RunView) => (run.left < 0 ? `${wholeText(-run.left)} over` : `${wholeText(run.left)} left`);

/**
 * @param turning known to turn now
 * @param mayTurn was turning when the lines ended
 */
function faceOf(
	view: LiveView,
	run: RunView | null,
	turning: boolean,
	mayTurn: boolean,
	nowMs: number,
	sinceMs: number,
	options: PresentOptions
): Face {
	if (run === null) {
		return face({
			ground: 'plain',
			shape: 'bobbin-empty',
			word: 'Waiting',
			text: 'Nothing waiting to be wound',
			taps: turning ? [] : [go('Fill the queue', 'main', '/wind')]
		});
	}
	if (run.state === 'kept') return keptFace(view, run, turning, nowMs, sinceMs, options);
	if (run.state === 'set-aside') {
		return face({
			ground: 'plain',
			shape: 'tag-aside',
			word: 'Set aside',
			ahead: aheadNext(view),
			text: run.setAsideReason,
			taps: turning ? [] : [queueTap],
			status: 'Set aside'
		});
	}
	if (run.question !== null && run.questionDetail !== null) {
		return turning ? turningQuestionFace(run, run.questionDetail, options) : questionFace(run, options);
	}
	if (options.asking === 'set-aside' && !turning) return setAsideFace(run);
	if (turning) return turningFace(run);
	if (mayTurn) {
		return face({
			ground: 'plain',
			shape: 'bobbin',
			word: 'Winding',
			beside: leftText(run),
			taps: run.state === 'taking-off' ? [doneTakingOff('small')] : [keepAsIsTap, snappedTap],
			pedalHeld: snappedTap
		});
	}
	return standingFace(view, run);
}

function turningFace(run: RunView): Face {
	const beside = leftText(run);
	const wire = { taps: [snappedTap], pedalHeld: snappedTap };
	if (run.state === 'taking-off') {
		return face({ ground: 'plain', shape: 'bobbin-unwinding', word: 'Taking off', beside });
	}
	if (run.cue === 'over') return face({ ground: 'stop', shape: 'bar', word: 'Stop', beside, alert: 'Stop. Over.' });
	if (run.cue === 'stop') return face({ ground: 'stop', shape: 'bar', word: 'Stop', beside, alert: 'Stop' });
	if (run.state === 'easing' || run.cue === 'ease') {
		const ahead = `stop at ${wholeText(run.target)}`;
		return face({
			ground: 'ease',
			shape: 'falling-bars',
			word: 'Ease off',
			beside,
			ahead,
			status: 'Ease off',
			...wire
		});
	}
	if (run.cue === 'look') {
		const at = run.nextLook ?? run.onBobbin;
		const status = `Look at ${wholeText(at)}`;
		return face({ ground: 'look', shape: 'eye', word: 'Look', beside, ahead: 'stop for a look', status, ...wire });
	}
	return face({ ground: 'plain', shape: 'bobbin', word: 'Winding', beside, ahead: aheadMark(run), ...wire });
}

function standingFace(view: LiveView, run: RunView): Face {
	const beside = leftText(run);
	switch (run.state) {
		case 'waiting': {
			const start = tap('Start this coil', 'main', { kind: 'start' });
			return face({
				ground: 'plain',
				shape: 'bobbin-empty',
				word: 'Waiting',
				beside,
				ahead: 'starts by turning, too',
				text: startCaution,
				taps: [start, queueTap],
				pedal: start
			});
		}
		case 'at-look': {
			const even = tap('Looks even', 'main', { kind: 'look', note: 'even' });
			return face({
				ground: 'look',
				shape: 'eye',
				word: 'Look',
				beside,
				ahead: 'wind on to go on',
				taps: [
					even,
					tap('high at one side', 'small', { kind: 'look', note: 'high-at-one-side' }),
					tap('guided again', 'small', { kind: 'look', note: 'guided-again' })
				],
				pedal: even,
				status: 'Look'
			});
		}
		case 'on-count': {
			const keep = tap('Keep this coil', 'main', { kind: 'keep' });
			const word =
				run.left === 0 ? 'On the mark' : run.left < 0 ? `${wholeText(-run.left)} over` : `${wholeText(run.left)} short`;
			return face({
				ground: 'mark',
				shape: 'tick',
				word,
				ahead: aheadNext(view),
				taps: [keep, snappedTap, takingOffTap],
				pedal: keep,
				status: word
			});
		}
		case 'taking-off': {
			const done = doneTakingOff('main');
			return face({
				ground: 'plain',
				shape: 'bobbin-unwinding',
				word: 'Taking off',
				beside,
				taps: [done],
				pedal: done
			});
		}
		default:
			return restingFace(run);
	}
}

const doneTakingOff = (size: BenchTap['size']) => tap('Done taking off', size, { kind: 'taking-off-done' });

/** Standing with wire on the bobbin and no look due: paused, stopped short of the mark, or wound past it. */
function restingFace(run: RunView): Face {
	const moved = run.movedTurnsAgo !== null;
	const over = run.left < 0;
	const near = run.onBobbin >= run.easeAt;
	// Just begun: nothing to keep yet, and the zero may still be put right.
	const taps = moved
		? [tap('Start here instead', 'small', { kind: 'start-here' }), snappedTap]
		: run.onBobbin === 0
			? [snappedTap]
			: [keepAsIsTap, snappedTap];
	return face({
		ground: over ? 'stop' : 'plain',
		shape: over ? 'bar' : 'bobbin-resting',
		word: over ? `${wholeText(-run.left)} over` : near || run.onBobbin === 0 ? 'Stopped' : 'Paused',
		beside: over ? '' : leftText(run),
		ahead: over ? 'take turns off, or keep it' : run.onBobbin === 0 ? 'turn the spindle to begin' : 'wind on to go on',
		taps: [...taps, takingOffTap, ask('Set aside', 'small', 'set-aside')],
		status: over ? 'Over' : ''
	});
}

/** What is copied on the coil: code, turns, which way the wire goes on, start and finish. */
function stickerLine(
	sticker: string,
	onBobbin: number,
	direction: Direction,
	startedAt: number | null,
	finishedAt: number | null,
	timeZone: string
): string {
	const parts = [sticker, `${turnsText(onBobbin)} ${direction === 'clockwise' ? '↻' : '↺'}`];
	if (startedAt !== null) parts.push(`start ${hourMinute(startedAt, timeZone)}`);
	if (finishedAt !== null) parts.push(`finish ${hourMinute(finishedAt, timeZone)}`);
	return parts.join(' · ');
}

function keptFace(
	view: LiveView,
	run: RunView,
	turning: boolean,
	nowMs: number,
	sinceMs: number,
	options: PresentOptions
): Face {
	const undoLeftMs = run.undoUntil === null ? 0 : run.undoUntil - (view.at + sinceMs);
	const seenMs = options.keptSeenAtMs === null ? 0 : nowMs - options.keptSeenAtMs;
	const undo: BenchTap = { ...tap('Undo', 'main', { kind: 'undo' }), enabled: seenMs >= undoAfterMs };
	const mayUndo = undoLeftMs > 0 && !turning;
	const finish = run.startedAt === null ? null : run.startedAt + (run.windingMs + run.stoppedMs) / view.timeScale;
	return face({
		ground: 'mark',
		shape: 'tag',
		word: 'Kept',
		beside: run.sticker ?? '',
		ahead: aheadNext(view),
		text:
			run.sticker === null
				? null
				: `To copy: ${stickerLine(run.sticker, run.onBobbin, run.coil.direction, run.startedAt, finish, options.timeZone)}`,
		taps: turning ? [] : mayUndo ? [undo, queueTap] : [queueTap],
		pedal: mayUndo && undo.enabled ? undo : null,
		status: 'Kept'
	});
}

function setAsideFace(run: RunView): Face {
	return face({
		ground: 'plain',
		shape: 'fork',
		word: 'Set aside',
		text: 'Why is this coil set aside?',
		beside: leftText(run),
		taps: [
			...setAsideReasons.map((reason) => tap(reason, 'small', { kind: 'set-aside', reason })),
			ask('Go back', 'small', null)
		],
		status: 'Why is this coil set aside?'
	});
}

/** An open question for the near line, while the spindle turns and nobody can answer it. */
function questionRemark(run: RunView): string | null {
	switch (run.questionDetail?.kind) {
		case 'jump':
			return `count jumped, held at ${wholeText(run.onBobbin)} – stop to answer`;
		case 'restarted':
			return 'winder restarted – stop to answer';
		case 'which-winder':
			return 'which winder? – stop to answer';
		default:
			return null;
	}
}

/**
 * A question waits until the spindle stands: meanwhile the coil still has its marks, and the maker is told of them. Not so
 * with the wire off, or where the count itself is in doubt.
 */
function turningQuestionFace(run: RunView, detail: QuestionDetail, options: PresentOptions): Face {
	if (detail.kind === 'snapped' || detail.kind === 'did-you-stop') {
		const asked = questionFace(run, options);
		return { ...asked, taps: [], entry: null, ahead: 'stop the winder to answer', status: asked.word };
	}
	// One question at a time: a snapped wire is told once this one is answered.
	const shown = { ...turningFace(run), taps: [], pedalHeld: null };
	if (detail.kind === 'jump') {
		// The count stands still: its stop and over hold, but nothing it shows is on its way to a mark.
		if (run.cue === 'stop' || run.cue === 'over') return { ...shown, beside: 'count held' };
		return face({
			ground: 'look',
			shape: 'fork',
			word: 'Count held',
			ahead: 'stop the winder to answer',
			status: 'Count held'
		});
	}
	return { ...shown, status: shown.status || (questionRemark(run) ?? '') };
}

/** What the winder's sensor cannot know is asked, never guessed. */
function questionFace(run: RunView, options: PresentOptions): Face {
	const detail = run.questionDetail!;
	const asked = { ground: 'look' as const, shape: 'fork' as const };
	let shown: Face;
	switch (detail.kind) {
		case 'jump':
			shown = face({
				...asked,
				word: 'Count jumped',
				text: `Count jumped – take ${wholeText(detail.take)} / keep ${wholeText(detail.keep)}`,
				taps: [
					tap(`Take ${wholeText(detail.take)}`, 'main', { kind: 'jump-take' }),
					tap(`Keep ${wholeText(detail.keep)}`, 'main', { kind: 'jump-keep' })
				]
			});
			break;
		case 'restarted': {
			const bound = detail.uncertainTurns;
			const text =
				bound === null
					? `Winder restarted at ${wholeText(detail.at)} – what it turned meanwhile is not known`
					: `Winder restarted at ${wholeText(detail.at)} – up to ${turnsText(bound)} uncertain`;
			if (options.asking === 'true-count') {
				shown = face({
					...asked,
					word: 'Restarted',
					text: 'Type the count as you know it',
					taps: [ask('Go back', 'small', null)],
					entry: {
						label: 'True count in turns',
						value: options.entered ?? detail.at,
						min: 0,
						max: entryMax,
						confirm: 'Use this count',
						tap: 'true-count'
					}
				});
			} else {
				shown = face({
					...asked,
					word: 'Restarted',
					text,
					taps: [
						tap(`Go on from ${wholeText(detail.at)}`, 'main', { kind: 'go-on' }),
						ask('Type the count', 'main', 'true-count'),
						tap('Set aside', 'main', { kind: 'set-aside', reason: 'winder restarted' })
					]
				});
			}
			break;
		}
		case 'did-you-stop':
			shown = face({
				...asked,
				word: 'Did you stop?',
				text: `Pulses ended at ${wholeText(detail.rpm)} rpm: has the sensor lost its magnet?`,
				taps: [
					tap('Yes, I stopped', 'main', { kind: 'stopped' }),
					tap('No, it turned on', 'main', { kind: 'not-stopped' })
				]
			});
			break;
		case 'which-winder':
			shown = face({
				...asked,
				word: 'Which winder?',
				text: `${detail.otherName} turned ${wholeText(detail.turns)} for this coil, too: wound where?`,
				taps: [
					tap('On this one', 'main', { kind: 'this-winder' }),
					tap(`On ${detail.otherName}`, 'main', { kind: 'other-winder' })
				]
			});
			break;
		case 'snapped':
			shown = face({
				...asked,
				word: 'Wire snapped',
				text: `Wire left at turn … – counted ${wholeText(detail.counted)}`,
				taps: [tap('The wire held', 'main', { kind: 'no-snap' })],
				entry: {
					label: 'Wire left at turn',
					value: options.entered ?? detail.guess,
					min: 0,
					max: Math.max(0, detail.counted),
					confirm: 'It left here',
					tap: 'snap-at'
				}
			});
			break;
	}
	return { ...shown, status: shown.text ?? shown.word };
}

/** No coil has more turns than the longest target, twice over. */
const entryMax = 200_000;

/** A tap on its way, or one that waits for the winder's lines, is not offered again. */
function withWaitingTaps(shown: Face, run: RunView | null, options: PresentOptions): Face {
	const waiting = new Set<TapKind['kind']>(options.waitingTaps);
	if (run?.pendingTap) waiting.add(run.pendingTap);
	if (waiting.size === 0) return shown;
	const off = (one: BenchTap | null) => (one?.act.do === 'tap' && waiting.has(one.act.tap.kind) ? null : one);
	// A tap that waits for lines can still be taken back.
	const pending = run?.pendingTap != null;
	const undo = pending && !waiting.has('undo') ? [tap('Undo', 'small', { kind: 'undo' })] : [];
	const taps = shown.taps.map((one) => (off(one) ? one : { ...one, enabled: false }));
	return {
		...shown,
		taps: pending ? [...taps.filter(({ enabled }) => !enabled), ...undo] : taps,
		entry: shown.entry && waiting.has(shown.entry.tap) ? null : shown.entry,
		pedal: pending ? null : off(shown.pedal),
		pedalHeld: pending ? null : off(shown.pedalHeld)
	};
}

/** Who may not look any more is told so: the winder is not what fails. */
const accessWords = {
	'signed-out': { word: 'Signed out', sentence: 'signed out: the winder goes on counting' },
	'not-allowed': { word: 'Not allowed', sentence: 'you may not use this bench any more' },
	gone: { word: 'Winder gone', sentence: 'this winder is no longer here' }
};

/** @param countAgeMs age of the count of a coil being wound, null: there is none to grow old */
function withAccess(
	shown: Face,
	view: LiveView,
	options: PresentOptions,
	turning: boolean,
	countAgeMs: number | null
): Face {
	if (options.access === 'ok') return shown;
	const { word, sentence } = accessWords[options.access];
	const out = options.access === 'signed-out' && !turning;
	return {
		...shown,
		ground: 'plain',
		shape: 'door',
		word,
		beside: countAgeMs === null || options.access !== 'signed-out' ? '' : ageText(countAgeMs),
		text: view.run === null ? sentence : view.run.state === 'kept' ? shown.text : null,
		taps: out ? [go('Sign in again', 'main', `/sign-in?to=${encodeURIComponent(`/bench/${view.winderId}`)}`)] : [],
		entry: null,
		pedal: null,
		pedalHeld: null,
		ahead: '',
		status: word,
		alert: ''
	};
}

const soundQuestion = 'Did you hear it?';
const soundAnswers: BenchTap[] = [
	{ key: 'heard', label: 'Yes, I heard it', size: 'small', act: { do: 'heard', yes: true }, enabled: true },
	{ key: 'unheard', label: 'No, screen only', size: 'small', act: { do: 'heard', yes: false }, enabled: true }
];

/** Asked beside what the state offers, never in its place: only what leads elsewhere makes room meanwhile. */
function withSoundQuestion(shown: Face): Face {
	const own = shown.taps.filter(({ act, size }) => act.do === 'tap' || (size === 'main' && act.do !== 'screen'));
	return { ...shown, taps: [...own, ...soundAnswers], status: shown.status || soundQuestion };
}

function aheadMark(run: RunView): string {
	if (run.nextLook !== null) return `look at ${wholeText(run.nextLook)}`;
	return `ease off at ${wholeText(run.easeAt)}`;
}

function aheadNext(view: LiveView): string {
	return view.next ? `next: ${view.next.name}, ${turnsText(view.next.target)}` : 'no coil waits after this one';
}

function messagesOf(
	view: LiveView,
	run: RunView | null,
	ageMs: number | null,
	link: LinkState,
	turning: boolean,
	options: PresentOptions
): string[] {
	const messages: string[] = [];
	if (options.access !== 'ok') messages.push(accessWords[options.access].sentence);
	if (options.refusal !== null) messages.push(options.refusal);
	const remark = turning && run ? questionRemark(run) : null;
	if (remark !== null) messages.push(remark);
	if (run?.startedAt === null && run.target > (fullTurnsOf(run) ?? Infinity)) {
		messages.push(`this many turns stand above the flange: full at ${wholeText(fullTurnsOf(run)!)}`);
	}
	if (!view.saving) messages.push('counting, not saving');
	// A commit under way is no news; facts held back by a database that is away are.
	const unsaved = Math.max(
		options.waitingMs >= waitingShownAfterMs ? options.waitingTaps.length : 0,
		view.saving ? 0 : view.unsaved
	);
	if (unsaved > 0) messages.push(`waiting to save (${unsaved})`);
	if (run?.pendingTap) messages.push('waiting for the winder’s lines');

	const lateMs = Math.max(
		options.delayMs >= delayShownAfterMs ? options.delayMs : 0,
		options.silenceMs >= silenceShownAfterMs ? options.silenceMs : 0
	);
	if (options.access === 'ok') {
		if (!options.streaming) messages.push('no connection to the server');
		else if (lateMs > 0) messages.push(`network is delaying data (${tenths(lateMs)})`);
		else if (ageMs !== null && !view.notices.includes('signed-off') && (link === 'old' || link === 'no-signal')) {
			messages.push(
				`last line ${ageMs < 60_000 ? `${Math.floor(ageMs / 1000)} s` : ageText(ageMs).slice(0, -4)} ago: cable?`
			);
		} else if (link === 'never') messages.push('this winder has not sent a line yet');
	}
	if (options.caughtUp) messages.push('caught up');
	if (options.missed.length > 0) messages.push(`while the screen was off: ${options.missed.join(', ')}`);
	if (run && run.state !== 'kept' && run.state !== 'set-aside') {
		if (run.movedTurnsAgo !== null) {
			messages.push(`counting since it moved, ${turnsText(run.movedTurnsAgo)} ago`);
		}
		if (run.takenBack > 0 && (run.state === 'taking-off' || view.rpm <= 0)) {
			messages.push(`${wholeText(run.takenBack)} taken back`);
		}
		const emptyTurns = run.turns - run.onBobbin;
		if (emptyTurns > 0 && run.snaps.length > 0)
			messages.push(`counted ${wholeText(run.turns)}, ${wholeText(emptyTurns)} empty`);
	}
	for (const notice of view.notices) messages.push(noticeText[notice]);
	if (!turning && options.sound === 'asleep') messages.push('sound is off – tap');
	if (!turning && !options.awake && run?.startedAt == null) {
		messages.push('this tablet may sleep: set its screen time-out');
	}
	if (view.last && run?.state === 'waiting') {
		const { state, sticker, onBobbin, direction, startedAt, endedAt } = view.last;
		messages.push(
			state === 'kept'
				? `copy on the last coil: ${stickerLine(sticker, onBobbin, direction, startedAt, endedAt, options.timeZone)}`
				: `last coil set aside at ${turnsText(onBobbin)}`
		);
	}
	return messages;
}

/** Turns at which the wire reaches the flange. A state kept by an earlier release does not say; null: not known. */
const fullTurnsOf = (run: RunView): number | null => run.coil.fullTurns ?? null;

/** Turns that bring the winding to the top of the flanges as they are drawn. */
const topTurnsOf = (run: RunView): number => fullTurnsOf(run) ?? run.target / targetAtUnknown;

/** How high turns stand, as a part of the flanges': each lays as much on as the one before it. */
function heightAt(run: RunView, turns: number): number {
	const top = topTurnsOf(run);
	return top > 0 ? Math.min(1, Math.max(0, turns / top)) : 0;
}

/** Every look of the coil that lies within the flanges. */
function marksOf(run: RunView): number[] {
	const top = topTurnsOf(run);
	const below = Math.min(run.target, top);
	const marks: number[] = [];
	if (run.firstLook > 0 && run.firstLook < below) marks.push(run.firstLook / top);
	const every = run.coil.lookEvery;
	if (every > 0 && top / every <= marksMax) {
		for (let at = every; at < below; at += every) if (at !== run.firstLook) marks.push(at / top);
	}
	return marks;
}

/** Only what is so now sounds: not an old number, not a replay, not a coil that is done. */
function soundOf(view: LiveView, run: RunView | null, link: LinkState): SoundNow {
	const quiet: SoundNow = { cue: 'quiet', key: 'quiet', nearness: 0, over: 0 };
	if (run === null || run.startedAt === null || run.state === 'kept' || run.state === 'set-aside') return quiet;
	// A winder that stood still when its lines ended has nothing to warn of, nor has one that said it goes.
	if (link === 'no-signal') {
		const warns = view.turning && !view.notices.includes('signed-off');
		return warns ? { ...quiet, cue: 'no-signal', key: `${run.runId} no-signal` } : quiet;
	}
	if (link !== 'live' || view.notices.includes('catching-up') || !view.turning) return quiet;
	if (run.state === 'taking-off' || run.cue === null) return quiet;
	if (run.question === 'snapped' || run.question === 'did-you-stop') return quiet;
	// A count that is held comes to no mark; one it stands on is still called.
	if (run.question === 'jump' && run.cue !== 'stop' && run.cue !== 'over') return quiet;
	const span = Math.max(1, run.stopAt - run.easeAt);
	return {
		cue: run.cue,
		key: `${run.runId} ${run.cue} ${run.cue === 'look' || run.cue === 'look-coming' ? run.nextLook : run.target}`,
		nearness: Math.min(1, Math.max(0, (run.onBobbin - run.easeAt) / span)),
		over: Math.max(0, -run.left)
	};
}

/**
 * Cues that lie between two states of one run and were not heard, in the order they came.
 */
export function missedCues(before: RunView | null, after: RunView | null): string[] {
	if (before === null || after === null || before.runId !== after.runId) return [];
	const passed = (mark: number) => before.onBobbin < mark && after.onBobbin >= mark;
	const missed: { at: number; text: string }[] = [];
	const every = after.coil.lookEvery;
	if (every > 0) {
		for (let at = (Math.floor(before.onBobbin / every) + 1) * every; at <= after.onBobbin; at += every) {
			if (at < after.easeAt) missed.push({ at, text: `look at ${wholeText(at)}` });
		}
	}
	const first = after.firstLook;
	if (first > 0 && passed(first) && (every === 0 || first % every !== 0)) {
		missed.push({ at: first, text: `look at ${wholeText(first)}` });
	}
	if (passed(after.easeAt)) missed.push({ at: after.easeAt, text: 'ease off' });
	if (passed(after.stopAt)) missed.push({ at: after.stopAt, text: 'stop' });
	return missed.sort((a, b) => a.at - b.at).map(({ text }) => text);
}
