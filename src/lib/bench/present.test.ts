import { describe, expect, it } from 'vitest';
import { aRun, aView } from './example-view.ts';
import {
	ageText,
	missedCues,
	present,
	quietOptions,
	undoAfterMs,
	type BenchModel,
	type PresentOptions
} from './present.ts';
import { questions, runStates, type LiveView, type QuestionDetail, type RunView } from '../winding/types.ts';

const still = { turning: false, rpm: 0 };
const show = (view: LiveView, options: Partial<PresentOptions> = {}, sinceMs = 0): BenchModel =>
	present(view, 10_000 + sinceMs, 10_000, { ...quietOptions, ...options });
const run = (part: Partial<RunView>, view: Partial<LiveView> = {}) => aView({ run: aRun(part), ...view });
const labels = (model: BenchModel) => model.taps.map(({ label }) => label);
const asked = (detail: QuestionDetail, view: Partial<LiveView> = still) =>
	run({ state: 'paused', question: detail.kind, questionDetail: detail }, view);

const details: Record<(typeof questions)[number], QuestionDetail> = {
	jump: { kind: 'jump', keep: 1, take: 2 },
	restarted: { kind: 'restarted', at: 5, uncertainTurns: 1 },
	'did-you-stop': { kind: 'did-you-stop', at: 5, rpm: 100 },
	'which-winder': { kind: 'which-winder', otherWinderId: 'w2', otherName: 'w-02', turns: 3 },
	snapped: { kind: 'snapped', guess: 4, counted: 5 }
};

describe('winding', () => {
	it('shows the count, what is left, the speed and the next look, and nothing to tap but "wire snapped"', () => {
		const model = show(aView());
		expect(model).toMatchObject({
			ground: 'plain',
			shape: 'bobbin',
			word: 'Winding',
			beside: '1,908 left',
			count: '3,412',
			old: false,
			name: 'Bridge · screw coil',
			goal: '5,320 turns',
			clock: 'winding 7:36',
			speed: '452 rpm',
			ahead: 'look at 3,500',
			winder: 'w-01',
			messages: [],
			status: '',
			alert: '',
			standing: false
		});
		expect(labels(model)).toEqual(['wire snapped']);
		expect(model.pedal).toBeNull();
		expect(model.pedalHeld?.act).toEqual({ do: 'tap', tap: { kind: 'snapped' } });
	});

	it('the clock goes on between two states, at the pace of a simulated winder', () => {
		expect(show(aView(), {}, 1_000).clock).toBe('winding 7:37');
		expect(show(aView({ timeScale: 10 }), {}, 1_000).clock).toBe('winding 7:46');
		expect(show(aView({ ...still }), {}, 1_000).clock).toBe('winding 7:36');
	});

	it('without a look ahead it says where ease off comes', () => {
		expect(show(run({ nextLook: null })).ahead).toBe('ease off at 5,280');
	});

	it('the copper stands as high as the part that is wound, with a mark at each look', () => {
		const model = show(run({ onBobbin: 2_660 }));
		expect(model.copper).toBeCloseTo(0.465, 9);
		expect(model.target).toBeCloseTo(0.93, 9);
		expect(model.marks).toHaveLength(11);
		expect(model.marks[0]).toBeCloseTo((0.93 * 100) / 5_320, 9);
		expect(show(run({ onBobbin: -4 })).copper).toBe(0);
	});

	it('on a bobbin whose room is known, copper and marks stand where they are between the flanges', () => {
		const coil = { ...aRun().coil, fullTurns: 8_000 };
		const model = show(run({ coil, onBobbin: 2_000 }));
		expect(model).toMatchObject({ copper: 0.25, target: 0.665 });
		expect(model.marks).toHaveLength(11);
		expect(model.marks).toContain(0.0125);
		expect(Math.max(...model.marks)).toBe(0.625);
	});

	it('copper that would stand above the flange ends at it, and so does the mark', () => {
		const coil = { ...aRun().coil, fullTurns: 4_000 };
		const model = show(run({ coil, onBobbin: 5_000 }));
		expect(model).toMatchObject({ copper: 1, target: 1 });
		expect(Math.max(...model.marks)).toBe(0.875);
	});

	it('says before the start, and only then, that the flange is too low for the target', () => {
		const words = 'this many turns stand above the flange: full at 4,000';
		const coil = { ...aRun().coil, fullTurns: 4_000 };
		const waiting = { state: 'waiting', startedAt: null, onBobbin: 0 } as const;
		expect(show(run({ ...waiting, coil }, still)).messages[0]).toBe(words);
		expect(show(run({ coil })).messages).toEqual([]);
		expect(show(run({ ...waiting, coil: { ...coil, fullTurns: 5_320 } }, still)).messages).not.toContain(words);
		expect(show(run(waiting, still)).messages).not.toContain(words);
	});

	it('a run kept by a release that knew no flanges is shown as before', () => {
		const coil: Partial<RunView['coil']> = { ...aRun().coil };
		delete coil.fullTurns;
		expect(show(run({ coil: coil as RunView['coil'], onBobbin: 2_660 })).copper).toBeCloseTo(0.465, 9);
	});

	it('marks that would run together are not drawn', () => {
		const coil = { ...aRun().coil, lookEvery: 5 };
		expect(show(run({ coil, firstLook: 0 })).marks).toEqual([]);
	});

	it('five digits are allowed for when the target or the count has them', () => {
		expect(show(aView()).digits).toBe(4);
		expect(show(run({ target: 10_400 })).digits).toBe(5);
		expect(show(run({ onBobbin: 10_001 })).digits).toBe(5);
	});

	it('begun by turning it says since when, and offers the other zero only once it stands', () => {
		const moved = { movedTurnsAgo: 38, onBobbin: 38 };
		expect(show(run(moved)).messages).toEqual(['counting since it moved, 38 turns ago']);
		expect(labels(show(run(moved)))).toEqual(['wire snapped']);
		expect(labels(show(run({ ...moved, state: 'paused' }, still)))).toContain('Start here instead');
	});

	it('turns taken back and empty turns are said', () => {
		expect(show(run({ takenBack: 4 }, { rpm: -45 })).messages).toEqual(['4 taken back']);
		const snap = { saidAt: 3_430, leftAt: 3_412, emptyTurns: 18 };
		expect(show(run({ turns: 3_430, snaps: [snap] })).messages).toEqual(['counted 3,430, 18 empty']);
	});

	it('every remark about the winder has its words', () => {
		const model = show(aView({ notices: ['bouncing', 'pulses-per-turn', 'clock-odd'] }));
		expect(model.messages).toEqual(['sensor is bouncing', 'two pulses a turn?', 'speed reading unreliable']);
	});
});

describe('cues', () => {
	it('a look called while turning is blue and asks to stop, without a tap for it', () => {
		const model = show(run({ cue: 'look', nextLook: 3_500, onBobbin: 3_498 }));
		expect(model).toMatchObject({ ground: 'look', shape: 'eye', word: 'Look', ahead: 'stop for a look' });
		expect(model.status).toBe('Look at 3,500');
		expect(labels(model)).toEqual(['wire snapped']);
		expect(model.pedal).toBeNull();
	});

	it('ease off is its own ground, word and shape', () => {
		const model = show(run({ state: 'easing', cue: 'ease', onBobbin: 5_284 }));
		expect(model).toMatchObject({ ground: 'ease', shape: 'falling-bars', word: 'Ease off', beside: '36 left' });
		expect(model.ahead).toBe('stop at 5,320');
	});

	it('stop while turning has nothing to tap at all and is an alert', () => {
		const model = show(run({ state: 'easing', cue: 'stop', onBobbin: 5_317 }));
		expect(model).toMatchObject({ ground: 'stop', shape: 'bar', word: 'Stop', beside: '3 left', alert: 'Stop' });
		expect(model.taps).toEqual([]);
		expect(model.pedal).toBeNull();
		expect(model.pedalHeld).toBeNull();
	});

	it('over while turning is stop, with how many over', () => {
		const model = show(run({ state: 'easing', cue: 'over', onBobbin: 5_357 }));
		expect(model).toMatchObject({ ground: 'stop', word: 'Stop', beside: '37 over' });
		expect(model.taps).toEqual([]);
	});

	it('the words read out do not change with the count', () => {
		const over = (onBobbin: number) => show(run({ state: 'easing', cue: 'over', onBobbin }));
		expect(over(5_322).alert).toBe(over(5_323).alert);
		const look = (onBobbin: number) => show(run({ cue: 'look', onBobbin }));
		expect(look(3_498).status).toBe(look(3_499).status);
	});
});

describe('standing still', () => {
	it('waiting has one tap to start, which the pedal does too, and a way to the queue', () => {
		const model = show(run({ state: 'waiting', onBobbin: 0, turns: 0, startedAt: null }, still));
		expect(model).toMatchObject({
			word: 'Waiting',
			shape: 'bobbin-empty',
			count: '0',
			beside: '5,320 left',
			clock: ''
		});
		expect(labels(model)).toEqual(['Start this coil', 'To the queue', 'Screen, sound']);
		expect(model.pedal?.label).toBe('Start this coil');
	});

	it('before a start it says which way the wire goes on, and the note that came with the coil', () => {
		const coil = { ...aRun().coil, direction: 'clockwise', topFaces: 'in', note: 'thin spool' } as const;
		const model = show(run({ state: 'waiting', onBobbin: 0, startedAt: null, coil }, still));
		expect(model.setUp).toBe('Seen from the top: clockwise ↻. Top faces in.');
		expect(model.clock).toBe('thin spool');
		expect(show(aView()).setUp).toBeNull();
	});

	it('before a start the cautions stand beside the tap, and a screen that may go dark says so', () => {
		const waiting = run({ state: 'waiting', onBobbin: 0, startedAt: null }, still);
		expect(show(waiting).text).toMatch(/before reaching in.*no emergency stop/);
		expect(show(waiting, { awake: false }).messages).toEqual(['this tablet may sleep: set its screen time-out']);
		expect(show(aView(), { awake: false }).messages).toEqual([]);
	});

	it('at a look: looks even is the tap and the pedal, two words beside it', () => {
		const model = show(run({ state: 'at-look', cue: 'look', onBobbin: 3_502 }, still));
		expect(model).toMatchObject({
			ground: 'look',
			shape: 'eye',
			word: 'Look',
			ahead: 'wind on to go on',
			speed: 'stopped'
		});
		expect(labels(model)).toEqual(['Looks even', 'high at one side', 'guided again', 'Screen, sound']);
		expect(model.taps.map(({ size }) => size)).toEqual(['main', 'small', 'small', 'small']);
		expect(model.pedal?.act).toEqual({ do: 'tap', tap: { kind: 'look', note: 'even' } });
		expect(model.pedalHeld).toBeNull();
	});

	it('on count: keep is the tap and the pedal', () => {
		const model = show(run({ state: 'on-count', onBobbin: 5_320 }, still));
		expect(model).toMatchObject({ ground: 'mark', shape: 'tick', word: 'On the mark', beside: '' });
		expect(model.ahead).toBe('next: Slug coil, 5,240 turns');
		expect(labels(model)[0]).toBe('Keep this coil');
		expect(model.pedal?.label).toBe('Keep this coil');
	});

	it.each([
		[5_323, '3 over'],
		[5_318, '2 short']
	])('on count at %i says %s', (onBobbin, word) => {
		expect(show(run({ state: 'on-count', cue: onBobbin > 5_320 ? 'over' : null, onBobbin }, still)).word).toBe(word);
	});

	it('paused offers only small taps and no pedal', () => {
		const model = show(run({ state: 'paused' }, still));
		expect(model).toMatchObject({ word: 'Paused', ahead: 'wind on to go on', speed: 'stopped' });
		expect(labels(model)).toEqual(['Keep as it is', 'wire snapped', 'taking off', 'Set aside', 'Screen, sound']);
		expect(model.taps.every(({ size }) => size === 'small')).toBe(true);
		expect(model.pedal).toBeNull();
	});

	it('stopped near the end is Stopped, past the tolerance it is over', () => {
		expect(show(run({ state: 'paused', onBobbin: 5_300 }, still)).word).toBe('Stopped');
		const over = show(run({ state: 'paused', cue: 'over', onBobbin: 5_357 }, still));
		expect(over).toMatchObject({ word: '37 over', ground: 'stop' });
		expect(labels(over)).toContain('Keep as it is');
	});

	it('started and not yet turned asks for the first turn and offers nothing to keep', () => {
		const model = show(run({ state: 'paused', onBobbin: 0, turns: 0 }, still));
		expect(model).toMatchObject({ word: 'Stopped', ahead: 'turn the spindle to begin' });
		expect(labels(model)).not.toContain('Keep as it is');
	});

	it('taking off ends with one tap, offered only at a standing spindle', () => {
		expect(labels(show(run({ state: 'taking-off' })))).toEqual([]);
		const model = show(run({ state: 'taking-off', takenBack: 12 }, still));
		expect(model).toMatchObject({ word: 'Taking off', shape: 'bobbin-unwinding' });
		expect(labels(model)[0]).toBe('Done taking off');
		expect(model.messages).toContain('12 taken back');
	});

	it('setting aside asks for one of a few reasons, each a tap', () => {
		const model = show(run({ state: 'paused' }, still), { asking: 'set-aside' });
		expect(labels(model)).toEqual([
			'wire snapped',
			'wound unevenly',
			'wrong wire or bobbin',
			'only a trial',
			'Go back'
		]);
		expect(model.taps[1]!.act).toEqual({ do: 'tap', tap: { kind: 'set-aside', reason: 'wound unevenly' } });
		expect(labels(show(run({ state: 'winding' }), { asking: 'set-aside' }))).toEqual(['wire snapped']);
	});

	it('with nothing to wind it says so and leads to the queue', () => {
		const model = show(aView({ run: null, next: null, waiting: 0, ...still }));
		expect(model).toMatchObject({ word: 'Waiting', count: null, text: 'Nothing waiting to be wound' });
		expect(model.taps[0]!.act).toEqual({ do: 'go', href: '/wind' });
	});
});

describe('kept', () => {
	const kept = (part: Partial<RunView> = {}, view: Partial<LiveView> = {}) => {
		const at = Date.UTC(2026, 11, 2, 10, 50);
		return run(
			{ state: 'kept', onBobbin: 5_320, sticker: 'K7Q2', undoUntil: at + 10_000, ...part },
			{ ...still, at, ...view }
		);
	};

	it('shows the line to copy, in the workshop’s own time', () => {
		const model = show(kept(), { keptSeenAtMs: 10_000, timeZone: 'Europe/Berlin' });
		expect(model).toMatchObject({ ground: 'mark', shape: 'tag', word: 'Kept', beside: 'K7Q2', status: 'Kept' });
		expect(model.text).toBe('To copy: K7Q2 · 5,320 turns ↺ · start 11:41 · finish 11:49');
	});

	it('undo cannot be pressed in the first second, so that a double tap never undoes', () => {
		const early = show(kept(), { keptSeenAtMs: 10_000 }, undoAfterMs - 1);
		expect(early.taps[0]).toMatchObject({ label: 'Undo', enabled: false });
		expect(early.pedal).toBeNull();
		const late = show(kept(), { keptSeenAtMs: 10_000 }, undoAfterMs);
		expect(late.taps[0]).toMatchObject({ label: 'Undo', enabled: true });
		expect(late.pedal?.label).toBe('Undo');
	});

	it('whether the test was heard is not asked in front of undo', () => {
		expect(labels(show(kept(), { keptSeenAtMs: 0, sound: 'ask' }))).toContain('Undo');
	});

	it('undo goes after its ten seconds, with no word from the server', () => {
		expect(labels(show(kept(), { keptSeenAtMs: 10_000 }, 10_000))).not.toContain('Undo');
		expect(labels(show(kept({ undoUntil: null }), { keptSeenAtMs: 0 }))).not.toContain('Undo');
	});

	it('the sticker line stands until the next coil turns', () => {
		const last = {
			runId: 'run-0',
			name: 'Screw coil',
			state: 'kept' as const,
			onBobbin: 5_320,
			sticker: 'K7Q2',
			direction: 'clockwise' as const,
			startedAt: Date.UTC(2026, 0, 5, 9, 30),
			endedAt: Date.UTC(2026, 0, 5, 9, 42)
		};
		const waiting = run({ state: 'waiting', onBobbin: 0, startedAt: null }, { ...still, last });
		expect(show(waiting).messages).toEqual([
			'copy on the last coil: K7Q2 · 5,320 turns ↻ · start 09:30 · finish 09:42'
		]);
		expect(show(aView({ last })).messages).toEqual([]);
	});

	it('set aside says why', () => {
		const model = show(run({ state: 'set-aside', setAsideReason: 'only a trial' }, still));
		expect(model).toMatchObject({ word: 'Set aside', text: 'only a trial' });
	});
});

describe('questions', () => {
	it('a jump asks which count to take', () => {
		const model = show(asked({ kind: 'jump', keep: 3_187, take: 8_187 }));
		expect(model).toMatchObject({ ground: 'look', shape: 'fork', word: 'Count jumped' });
		expect(model.text).toBe('Count jumped – take 8,187 / keep 3,187');
		expect(labels(model)).toEqual(['Take 8,187', 'Keep 3,187']);
		expect(model.pedal).toBeNull();
	});

	it('a restart gives its bound and three ways on', () => {
		const detail = { kind: 'restarted', at: 3_187, uncertainTurns: 9 } as const;
		const model = show(asked(detail));
		expect(model.text).toBe('Winder restarted at 3,187 – up to 9 turns uncertain');
		expect(labels(model)).toEqual(['Go on from 3,187', 'Type the count', 'Set aside']);
		expect(show(asked({ ...detail, uncertainTurns: null })).text).toContain('not known');
	});

	it('typing the true count begins at the count known', () => {
		const model = show(asked({ kind: 'restarted', at: 3_187, uncertainTurns: 9 }), { asking: 'true-count' });
		expect(model.entry).toMatchObject({ value: 3_187, tap: 'true-count', confirm: 'Use this count' });
		const typed = show(asked({ kind: 'restarted', at: 3_187, uncertainTurns: 9 }), {
			asking: 'true-count',
			entered: 3_195
		});
		expect(typed.entry?.value).toBe(3_195);
	});

	it('pulses that ended at speed are a question, never a calm stop', () => {
		const model = show(asked({ kind: 'did-you-stop', at: 3_412, rpm: 452 }));
		expect(model.word).toBe('Did you stop?');
		expect(labels(model)).toEqual(['Yes, I stopped', 'No, it turned on']);
	});

	it('two winders on one coil are told apart by the maker', () => {
		const model = show(asked({ kind: 'which-winder', otherWinderId: 'w2', otherName: 'w-02', turns: 12 }));
		expect(labels(model)).toEqual(['On this one', 'On w-02']);
	});

	it('a snapped wire asks for the turn, with the best guess to step or type', () => {
		const model = show(asked({ kind: 'snapped', guess: 2_950, counted: 2_990 }));
		expect(model.entry).toMatchObject({ value: 2_950, min: 0, max: 2_990, tap: 'snap-at' });
		expect(model.text).toBe('Wire left at turn … – counted 2,990');
		expect(labels(model)).toEqual(['The wire held']);
	});

	it('a question offers no answer while the spindle turns', () => {
		for (const detail of Object.values(details)) {
			const model = show(asked(detail, {}));
			expect(model.taps).toEqual([]);
			expect(model.entry).toBeNull();
			expect(model.pedal).toBeNull();
			expect(model.pedalHeld).toBeNull();
		}
	});

	describe.each([
		[details.restarted, 'winder restarted – stop to answer'],
		[details['which-winder'], 'which winder? – stop to answer']
	])('while %o waits at a turning spindle', (detail, remark) => {
		const turning = (part: Partial<RunView>) => show(run({ question: detail.kind, questionDetail: detail, ...part }));

		it.each([
			[{ state: 'winding', cue: null }, { ground: 'plain', word: 'Winding', beside: '1,908 left' }, 'quiet'],
			[{ state: 'winding', cue: 'look-coming' }, { ground: 'plain', word: 'Winding' }, 'look-coming'],
			[{ state: 'winding', cue: 'look' }, { ground: 'look', shape: 'eye', word: 'Look' }, 'look'],
			[{ state: 'easing', cue: 'ease' }, { ground: 'ease', word: 'Ease off' }, 'ease'],
			[{ state: 'easing', cue: 'stop' }, { ground: 'stop', word: 'Stop', alert: 'Stop' }, 'stop'],
			[{ state: 'easing', cue: 'over', onBobbin: 5_330 }, { ground: 'stop', word: 'Stop', beside: '10 over' }, 'over']
		] as const)('%o is shown and sounds, with the question as a remark', (part, face, sound) => {
			const model = turning(part);
			expect(model).toMatchObject(face);
			expect(model.sound.cue).toBe(sound);
			expect(model.messages[0]).toBe(remark);
			expect(turning({ ...part, questionDetail: null, question: null }).messages).toEqual([]);
		});

		it('it is asked once the spindle stands', () => {
			const model = show(asked(detail));
			expect(model).toMatchObject({ ground: 'look', shape: 'fork' });
			expect(model.taps.length).toBeGreaterThan(1);
			expect(model.messages).not.toContain(remark);
		});
	});

	it('a count that jumped is held: turning on says so large, and only its stop and over still sound', () => {
		const jumped = (part: Partial<RunView>) =>
			show(run({ question: 'jump', questionDetail: { kind: 'jump', keep: 3_412, take: 8_412 }, ...part }));
		for (const cue of [null, 'look-coming', 'look', 'ease'] as const) {
			const model = jumped({ cue });
			expect(model).toMatchObject({ ground: 'look', shape: 'fork', word: 'Count held', count: '3,412' });
			expect(model.ahead).toBe('stop the winder to answer');
			expect(model.messages).toEqual(['count jumped, held at 3,412 – stop to answer']);
			expect(model.sound.cue).toBe('quiet');
		}
		for (const cue of ['stop', 'over'] as const) {
			const model = jumped({ cue, state: 'easing', onBobbin: cue === 'over' ? 5_330 : 5_317 });
			expect(model).toMatchObject({ ground: 'stop', word: 'Stop', beside: 'count held' });
			expect(model.sound.cue).toBe(cue);
		}
	});

	it.each(['look', 'ease', 'stop', 'over'] as const)('with the wire off or a stop in doubt no %s is called', (cue) => {
		for (const kind of ['snapped', 'did-you-stop'] as const) {
			const model = show(run({ question: kind, questionDetail: details[kind], cue }));
			expect(model).toMatchObject({ ground: 'look', shape: 'fork', ahead: 'stop the winder to answer', alert: '' });
			expect(model.sound.cue).toBe('quiet');
		}
	});

	it('a question stays answerable while the winder is not heard', () => {
		const model = show(asked({ kind: 'jump', keep: 3_187, take: 8_187 }, { ageMs: 60_000 }));
		expect(model).toMatchObject({ ground: 'no-signal', word: 'Count jumped', beside: '1:00 ago' });
		expect(labels(model)).toContain('Take 8,187');
	});
});

describe('an old number is never shown as live', () => {
	it('1.5 s after the last line, while turning, the count is old and its age stands beside it', () => {
		const model = show(aView({ ageMs: 100 }), {}, 1_400);
		expect(model).toMatchObject({ word: 'Winding', old: true, beside: '1.5 s ago', ground: 'no-signal' });
		expect(model.messages).toEqual(['last line 1 s ago: cable?']);
		expect(show(aView({ ageMs: 100 }), {}, 1_399).old).toBe(false);
	});

	it('standing it may be older before it is called so', () => {
		expect(show(run({ state: 'paused' }, { ...still, ageMs: 2_400 })).old).toBe(false);
		expect(show(run({ state: 'paused' }, { ...still, ageMs: 2_500 })).old).toBe(true);
	});

	it('at 3 s it is No signal, with the age counting on by this screen’s own clock', () => {
		expect(show(aView({ ageMs: 0 }), {}, 4_200)).toMatchObject({
			ground: 'no-signal',
			shape: 'broken-line',
			word: 'No signal',
			beside: '0:04 ago',
			old: true,
			count: '3,412',
			speed: '',
			status: 'No signal'
		});
		expect(show(aView({ ageMs: 0 }), {}, 252_000).beside).toBe('4:12 ago');
	});

	it('a stop cue stays red while its number grows old, and ends when the signal is lost', () => {
		const stop = run({ state: 'easing', cue: 'stop', onBobbin: 5_317 }, { ageMs: 2_000 });
		expect(show(stop)).toMatchObject({ ground: 'stop', word: 'Stop', old: true, beside: '2.0 s ago' });
		expect(show(stop, {}, 2_000)).toMatchObject({ ground: 'no-signal', word: 'No signal', alert: '' });
	});

	it('with the signal lost the maker may have stopped: keep and snapped are within reach', () => {
		expect(labels(show(aView({ ageMs: 9_000 })))).toEqual(['Keep as it is', 'wire snapped', 'Screen, sound']);
		const onCount = run({ state: 'on-count', onBobbin: 5_320 }, { ...still, ageMs: 9_000 });
		expect(labels(show(onCount))[0]).toBe('Keep this coil');
	});

	it('what was made long before it came is as old as it is', () => {
		expect(show(aView({ ageMs: 100 }), { madeBeforeMs: 4_000 })).toMatchObject({
			word: 'No signal',
			beside: '0:04 ago'
		});
	});

	it('a screen that was away calls its number old until something comes', () => {
		expect(show(aView({ ageMs: 0 }), { unsure: true }).old).toBe(true);
	});

	it('a network that holds data back is named, with by how much', () => {
		expect(show(aView(), { delayMs: 2_100 }).messages).toEqual(['network is delaying data (2.1 s)']);
		expect(show(aView(), { silenceMs: 2_700 }).messages).toEqual(['network is delaying data (2.7 s)']);
		expect(show(aView(), { silenceMs: 2_200 }).messages).toEqual([]);
	});

	it('a lost server is told apart from a lost winder', () => {
		expect(show(aView({ ageMs: 4_000 }), { streaming: false }).messages).toEqual(['no connection to the server']);
		expect(show(aView({ ageMs: 4_000 })).messages).toEqual(['last line 4 s ago: cable?']);
		expect(show(aView({ ageMs: 252_000 })).messages).toEqual(['last line 4:12 ago: cable?']);
	});

	it('a winder never heard of is said near, and a coil that waits is no alarm', () => {
		const model = show(run({ state: 'waiting', startedAt: null, onBobbin: 0 }, { ...still, ageMs: null, boot: null }));
		expect(model).toMatchObject({ word: 'Waiting', old: false });
		expect(model.messages).toEqual(['this winder has not sent a line yet']);
	});

	it('a winder that signed off says so at once, without a cable to look for or a sound', () => {
		const model = show(aView({ ageMs: 100, notices: ['signed-off'] }), {}, 4_200);
		expect(model).toMatchObject({ word: 'Signed off', beside: '0:04 ago', old: true, status: 'Signed off' });
		expect(model.messages).toEqual(['winder signed off']);
		expect(model.link).toBe('signed off');
		expect(model.sound.cue).toBe('quiet');
		expect(show(aView({ ageMs: 100, notices: ['signed-off'] })).word).toBe('Signed off');
		const waiting = run({ state: 'waiting', startedAt: null, onBobbin: 0 }, { ...still, notices: ['signed-off'] });
		expect(show(waiting)).toMatchObject({ word: 'Waiting', messages: ['winder signed off'] });
	});

	it('the state of the link stands in a word beside the winder', () => {
		expect(show(aView())).toMatchObject({ winder: 'w-01', link: 'live' });
		expect(show(aView({ ageMs: 2_000 })).link).toBe('old');
		expect(show(aView({ ageMs: 4_000 })).link).toBe('no signal');
		expect(show(aView({ ageMs: null, boot: null })).link).toBe('not heard yet');
		expect(show(aView(), { access: 'signed-out' }).link).toBe('');
	});

	it('a kept coil’s count is not old however long ago it was', () => {
		expect(show(run({ state: 'kept', sticker: 'K7Q2' }, { ...still, ageMs: 90_000 })).old).toBe(false);
	});

	it('ages fit beside the word', () => {
		expect(ageText(4_999)).toBe('0:04 ago');
		expect(ageText(3_599_000)).toBe('59:59 ago');
		expect(ageText(3 * 3_600_000)).toBe('3 h ago');
	});
});

describe('saving', () => {
	it('a database that does not answer is said', () => {
		expect(show(aView({ saving: false })).messages).toEqual(['counting, not saving']);
		expect(show(aView({ saving: false, unsaved: 2 })).messages).toEqual([
			'counting, not saving',
			'waiting to save (2)'
		]);
		expect(show(aView({ unsaved: 1 })).messages).toEqual([]);
	});

	it('a tap that waits for the server is counted and not offered twice', () => {
		const onCount = run({ state: 'on-count', onBobbin: 5_320 }, still);
		const model = show(onCount, { waitingTaps: ['keep'], waitingMs: 900 });
		expect(model.messages).toEqual(['waiting to save (1)']);
		expect(model.taps[0]).toMatchObject({ label: 'Keep this coil', enabled: false });
		expect(model.pedal).toBeNull();
		expect(show(onCount, { waitingTaps: ['keep'], waitingMs: 100 }).messages).toEqual([]);
	});

	it('a tap that waits for the winder’s lines says so and can be taken back', () => {
		const model = show(run({ state: 'on-count', onBobbin: 5_320, pendingTap: 'keep' }, still));
		expect(model.messages).toEqual(['waiting for the winder’s lines']);
		expect(model.taps.find(({ label }) => label === 'Keep this coil')?.enabled).toBe(false);
		expect(labels(model)).toEqual(['Keep this coil', 'Undo', 'Screen, sound']);
		expect(model.pedal).toBeNull();
	});

	it('a refused tap shows its reason', () => {
		expect(show(aView(), { refusal: 'The spindle turns.' }).messages).toEqual(['The spindle turns.']);
	});

	it.each([
		['signed-out', 'Signed out', 'signed out: the winder goes on counting'],
		['not-allowed', 'Not allowed', 'you may not use this bench any more'],
		['gone', 'Winder gone', 'this winder is no longer here']
	] as const)('%s is told, and nothing can be tapped', (access, word, message) => {
		const model = show(run({ state: 'paused' }, still), { access });
		expect(model).toMatchObject({ ground: 'plain', shape: 'door', word, old: true });
		expect(model.messages[0]).toBe(message);
		expect(model.taps.every(({ act }) => act.do === 'go')).toBe(true);
		expect(model.pedal).toBeNull();
	});

	it('who was signed out is not told that the winder has no signal, and the count is shown with its age', () => {
		const model = show(aView({ ageMs: 0 }), { access: 'signed-out' }, 4_200);
		expect(model).toMatchObject({ ground: 'plain', word: 'Signed out', beside: '0:04 ago', old: true, speed: '' });
		expect(model.messages).toEqual(['signed out: the winder goes on counting']);
		expect(labels(model)).toEqual(['Sign in again']);
		const stop = show(run({ state: 'easing', cue: 'stop' }), { access: 'signed-out' });
		expect(stop).toMatchObject({ ground: 'plain', word: 'Signed out', alert: '' });
	});
});

describe('sound', () => {
	it.each(['look-coming', 'look', 'ease', 'stop', 'over'] as const)('%s sounds while the spindle turns', (cue) => {
		expect(show(run({ state: 'winding', cue })).sound.cue).toBe(cue);
	});

	it('nothing sounds at a standing spindle, for an old number, in a replay or for a kept coil', () => {
		const cue = { cue: 'stop', state: 'easing' } as const;
		expect(show(run({ ...cue, state: 'on-count' }, still)).sound.cue).toBe('quiet');
		expect(show(run(cue, { ageMs: 1_600 })).sound.cue).toBe('quiet');
		expect(show(run(cue, { notices: ['catching-up'] })).sound.cue).toBe('quiet');
		expect(show(run({ cue: 'stop', state: 'kept' })).sound.cue).toBe('quiet');
	});

	it('a lost signal sounds only for a spindle that was turning', () => {
		expect(show(aView({ ageMs: 3_000 })).sound.cue).toBe('no-signal');
		expect(show(run({ state: 'paused' }, { ...still, ageMs: 60_000 })).sound.cue).toBe('quiet');
		expect(show(aView({ run: null, ageMs: 3_000 })).sound.cue).toBe('quiet');
	});

	it('ease comes nearer from its mark to the stop', () => {
		const ease = (onBobbin: number) => show(run({ cue: 'ease', state: 'easing', onBobbin })).sound.nearness;
		expect(ease(5_280)).toBe(0);
		expect(ease(5_317)).toBe(1);
	});

	it('each look is a cue of its own', () => {
		const key = (nextLook: number) => show(run({ cue: 'look', nextLook })).sound.key;
		expect(key(500)).not.toBe(key(1_000));
	});

	it('a sleeping sound is said before a run starts, and the test is asked about', () => {
		const waiting = run({ state: 'waiting', startedAt: null, onBobbin: 0 }, still);
		expect(show(waiting, { sound: 'asleep' }).messages).toEqual(['sound is off – tap']);
		const model = show(waiting, { sound: 'ask' });
		expect(labels(model)).toEqual(['Start this coil', 'Yes, I heard it', 'No, screen only']);
		expect(model.messages[0]).toBe('Did you hear it?');
		expect(model.text).toMatch(/no emergency stop/);
		expect(labels(show(aView(), { sound: 'ask' }))).toEqual(['wire snapped']);
	});

	it.each([
		['waiting', 'Start this coil'],
		['at-look', 'Looks even'],
		['on-count', 'Keep this coil'],
		['paused', 'Keep as it is'],
		['taking-off', 'Done taking off']
	] as const)('%s keeps "%s" and its pedal while the test is asked about', (state, label) => {
		const view = run({ state, startedAt: state === 'waiting' ? null : 1 }, still);
		const [plain, asking] = [show(view), show(view, { sound: 'ask' })];
		expect(labels(asking)[0]).toBe(label);
		expect(asking.taps[0]).toEqual(plain.taps[0]);
		expect(asking.pedal).toEqual(plain.pedal);
		const coil = plain.taps.filter(({ act }) => act.do === 'tap');
		expect(asking.taps).toEqual([...coil, ...asking.taps.slice(-2)]);
		expect(asking.taps.slice(-2).map(({ act }) => act.do)).toEqual(['heard', 'heard']);
		expect(asking.taps.length).toBeLessThanOrEqual(5);
		expect(asking.word).toBe(plain.word);
	});

	it('cues missed behind a dark screen are listed in their order', () => {
		expect(missedCues(aRun({ onBobbin: 450 }), aRun({ onBobbin: 1_010 }))).toEqual(['look at 500', 'look at 1,000']);
		expect(missedCues(aRun({ onBobbin: 60 }), aRun({ onBobbin: 120 }))).toEqual(['look at 100']);
		expect(missedCues(aRun({ onBobbin: 5_270 }), aRun({ onBobbin: 5_330 }))).toEqual(['ease off', 'stop']);
		expect(missedCues(aRun({ onBobbin: 450 }), aRun({ onBobbin: 460 }))).toEqual([]);
		expect(missedCues(aRun({ onBobbin: 450 }), aRun({ runId: 'run-2', onBobbin: 1_010 }))).toEqual([]);
		expect(show(aView(), { missed: ['look at 500'] }).messages).toEqual(['while the screen was off: look at 500']);
	});

	it('lines that had been missing and came are said', () => {
		expect(show(aView(), { caughtUp: true }).messages).toEqual(['caught up']);
	});
});

describe('every state, question and link', () => {
	const every = runStates.flatMap((state) =>
		[null, ...questions].flatMap((question) =>
			[true, false].flatMap((turning) =>
				[0, 2_000, 4_000, 90_000, null].map((ageMs) => ({ state, question, turning, ageMs }))
			)
		)
	);

	it('keeps one meaning per pedal, at most one row of large taps, and none at a turning spindle', () => {
		for (const { state, question, turning, ageMs } of every) {
			const part = { state, question, questionDetail: question && details[question] };
			const model = show(run(part, { turning, rpm: turning ? 300 : 0, ageMs }));
			const heard = ageMs !== null && ageMs < 3_000;
			expect(model.word).not.toBe('');
			expect(new Set(model.taps.map(({ key }) => key)).size).toBe(model.taps.length);
			if (turning && heard) {
				expect(model.taps.every(({ label }) => label === 'wire snapped')).toBe(true);
				expect(model.pedal).toBeNull();
				expect(model.standing).toBe(false);
			}
			if (model.pedal) expect(model.taps).toContainEqual(model.pedal);
			expect(model.taps.filter(({ size }) => size === 'main').length).toBeLessThanOrEqual(3);
		}
	});
});
