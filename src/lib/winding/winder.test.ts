import { describe, expect, it } from 'vitest';
import { Bench } from './bench-double.ts';
import { askWhichWinder, changePlan, commands, dropWaiting, idleTurns, mergeCursor, wantsCoil } from './winder.ts';

/** A bench with a coil that has been started with a tap at zero. */
function started(changes = {}, plan = {}): Bench {
	const bench = new Bench(changes);
	bench.hi();
	bench.coil(plan);
	bench.tap({ kind: 'start' });
	bench.wait(500);
	bench.tick();
	return bench;
}

describe('a coil from start to kept', () => {
	it('is stopped at the looks at 100, 500 and 1,000 and at the target', () => {
		const bench = started();
		expect(bench.run.state).toBe('winding');
		bench.turn(96);
		expect(bench.run.cue).toBe('look-coming');
		bench.turn(4);
		expect(bench.run.cue).toBe('look');
		expect(bench.run.state).toBe('winding');
		bench.stand();
		expect(bench.run.state).toBe('at-look');
		expect(bench.tap({ kind: 'look', note: 'even' })).toEqual({ ok: true, pending: false });
		expect(bench.run.state).toBe('paused');
		bench.turn(401);
		bench.stand();
		expect(bench.run.state).toBe('at-look');
		bench.tap({ kind: 'look', note: 'high-at-one-side' });
		bench.turn(499);
		bench.stand();
		// Wound on without a word.
		bench.turn(150);
		expect(bench.run.state).toBe('winding');
		bench.turn(12);
		expect(bench.run.state).toBe('easing');
		expect(bench.run.cue).toBe('ease');
		bench.turn(35);
		expect(bench.run.cue).toBe('stop');
		bench.turn(3);
		bench.stand();
		expect(bench.run.state).toBe('on-count');
		expect(bench.run.left).toBe(0);
		expect(bench.run.looks).toEqual([
			{ mark: 100, turns: 100, note: 'even' },
			{ mark: 500, turns: 501, note: 'high-at-one-side' },
			{ mark: 1000, turns: 1000, note: null }
		]);
		bench.wait(200);
		expect(bench.tap({ kind: 'keep' })).toEqual({ ok: true, pending: true });
		expect(bench.run.pendingTap).toBe('keep');
		bench.wait(400);
		bench.tick();
		expect(bench.run.state).toBe('kept');
		expect(bench.run.turns).toBe(1200);
		expect(bench.count('kept')).toBe(1);
		for (const kind of ['started', 'look-due', 'look-seen', 'eased', 'stop-cue', 'on-count'] as const) {
			expect(bench.kinds()).toContain(kind);
		}
		expect(bench.count('look-due')).toBe(3);
	});

	it('has no early look on the second coil of a session', () => {
		const bench = started();
		bench.turn(1200);
		bench.stand();
		bench.tap({ kind: 'keep' });
		bench.wait(300);
		bench.tick();
		expect(wantsCoil(bench.state)).toBe(true);
		bench.coil({}, 'run-2');
		bench.wait(11_000);
		expect(bench.run.runId).toBe('run-2');
		expect(bench.run.state).toBe('waiting');
		expect(bench.run.firstLook).toBe(0);
		expect(bench.run.nextLook).toBe(500);
	});

	it('is looked at early where its spec says so, whatever was wound just before', () => {
		const bench = started();
		bench.turn(1200);
		bench.stand();
		bench.tap({ kind: 'keep' });
		bench.wait(300);
		bench.tick();
		bench.coil({ firstLook: 120 }, 'run-2');
		bench.wait(11_000);
		expect(bench.run).toMatchObject({ runId: 'run-2', firstLook: 120, nextLook: 120 });
	});

	it('is looked at early where its spec says so, or not at all', () => {
		expect(started({}, { firstLook: 250 }).run).toMatchObject({ firstLook: 250, nextLook: 250 });
		expect(started({}, { firstLook: 0 }).run).toMatchObject({ firstLook: 0, nextLook: 500 });
		expect(started({}, { firstLook: 60, lookEvery: 0 }).run).toMatchObject({ firstLook: 60, nextLook: 60 });
		expect(started({}, { lookEvery: 0 }).run).toMatchObject({ firstLook: 0, nextLook: null });
	});

	it('has no early look that is not early', () => {
		expect(started({}, { firstLook: 500 }).run).toMatchObject({ firstLook: 0, nextLook: 500 });
		expect(started({}, { firstLook: 600, lookEvery: 0 }).run).toMatchObject({ firstLook: 0, nextLook: null });
	});

	it('tells the winder of the early look of its spec', () => {
		const bench = started({}, { firstLook: 250 });
		const { lines } = commands(bench.state, bench.config, bench.now, 'all');
		expect(lines.find((line) => line.verb === 'SET')).toMatchObject({ look: 500, fst: 250 });
	});

	it('begins by turning and says how many turns ago it moved', () => {
		const bench = new Bench();
		bench.hi();
		bench.coil();
		bench.wait(3_000);
		bench.turn(38);
		expect(bench.run.state).toBe('winding');
		expect(bench.run.movedTurnsAgo).toBe(38);
		expect(bench.kinds()).toContain('moved');
		bench.tap({ kind: 'start-here' });
		bench.wait(50);
		bench.tick();
		expect(bench.run.turns).toBe(0);
		expect(bench.run.movedTurnsAgo).toBeNull();
		bench.turn(10);
		expect(bench.run.turns).toBe(10);
	});

	it('does not stand when the first ticks after its go know no speed yet', () => {
		const bench = started();
		bench.event('go');
		bench.now += 300;
		bench.f += 1;
		bench.r = 0;
		bench.tick();
		bench.turning = true;
		bench.turn(20, 600, false);
		expect(bench.count('stopped')).toBe(0);
		expect(bench.run.state).toBe('winding');
	});

	it('stands when a winder without events says 0 for a second', () => {
		const bench = started();
		for (let i = 1; i <= 20; i += 1) {
			bench.now += 100;
			bench.f += 1;
			bench.r = 600;
			bench.tick();
		}
		bench.r = 0;
		bench.now += 400;
		bench.tick();
		expect(bench.view.turning).toBe(true);
		bench.now += 700;
		bench.tick();
		expect(bench.view.turning).toBe(false);
		expect(bench.run.state).toBe('paused');
	});

	it('stands when it comes back from a gap and says no speed', () => {
		const bench = started();
		bench.turn(20, 600, false);
		bench.down = true;
		bench.turn(30);
		bench.stand();
		bench.down = false;
		bench.hi({ r: 0 });
		expect(bench.run.turns).toBe(50);
		expect(bench.view.turning).toBe(false);
	});

	it('stands when its stop comes after a later tick', () => {
		const bench = started();
		bench.turn(20);
		bench.down = true;
		bench.now += 500;
		bench.event('stop');
		bench.down = false;
		bench.now += 100;
		bench.r = 0;
		bench.tick();
		expect(bench.view.turning).toBe(true);
		bench.give(bench.held[0]!);
		expect(bench.view.turning).toBe(false);
		expect(bench.run.state).toBe('paused');
		expect(bench.count('stopped')).toBe(1);
	});

	it('counts a coil put on a turning winder from when the spindle began to move', () => {
		const bench = new Bench();
		bench.hi();
		bench.turn(12);
		bench.coil();
		expect(bench.run.turns).toBe(12);
		bench.turn(5);
		expect(bench.run.turns).toBe(17);
		expect(bench.run.movedTurnsAgo).toBe(17);
	});

	it('counts a coil put on a standing winder from there', () => {
		const bench = new Bench();
		bench.hi();
		bench.turn(50);
		bench.stand();
		expect(idleTurns(bench.state)).toBe(50);
		bench.coil();
		expect(bench.run.turns).toBe(0);
	});

	it('keeps the time winding and standing, mean and top speed', () => {
		const bench = started();
		bench.turn(100, 600, false);
		bench.stand(4_000);
		bench.turn(100, 300, false);
		const { windingMs, stoppedMs, rpmTop } = bench.run;
		// 100 turns at 600 rpm take 10 s, and 500 ms until the device says it stands; then 100 at 300 rpm 20 s.
		expect(windingMs).toBe(10_000 + 500 + 20_000);
		expect(stoppedMs).toBe(500 + 4_000);
		expect(rpmTop).toBe(600);
		expect(bench.run.rpmMean).toBe(Math.round((200 / 30_500) * 60_000));
	});

	it('says stop early by as much as the winder is set, and over past the target', () => {
		const bench = started({ stopEarlyTurns: 10, easeEarlyTurns: 80 }, { lookEvery: 0 });
		bench.turn(1120, 600, false);
		expect(bench.run.cue).toBe('ease');
		bench.turn(70, 600, false);
		expect(bench.run.cue).toBe('stop');
		bench.turn(13, 600);
		bench.stand();
		expect(bench.run.cue).toBe('over');
		expect(bench.run.state).toBe('on-count');
		expect(bench.run.left).toBe(-3);
		expect(bench.count('over')).toBe(1);
	});

	it('is paused, not on count, when over by more than its tolerance, and can be kept all the same', () => {
		const bench = started({}, { lookEvery: 0 });
		bench.turn(1237);
		bench.stand();
		expect(bench.run.state).toBe('paused');
		expect(bench.run.left).toBe(-37);
		expect(bench.tap({ kind: 'keep' }).ok).toBe(true);
	});

	it('is kept by itself after standing on count as long as the maker has set', () => {
		const bench = started({ keepAfterMs: 20_000 }, { lookEvery: 0 });
		bench.turn(1200);
		bench.stand(15_000);
		expect(bench.run.state).toBe('on-count');
		bench.wait(900);
		for (let i = 0; i < 8; i += 1) {
			bench.wait(1_000);
			bench.tick();
		}
		expect(bench.run.state).toBe('kept');
		expect(bench.facts.find((fact) => fact.kind === 'kept')?.memberId).toBeNull();
	});
});

describe('direction', () => {
	it('counts a reverse-wound coil upwards on a winder that sees direction', () => {
		const bench = started({}, { direction: 'clockwise' });
		bench.turn(-40);
		expect(bench.run.turns).toBe(40);
		const set = bench.commands().find((line) => line.verb === 'SET');
		expect(set).toMatchObject({ tgt: -1200, from: 0 });
	});

	it('reverses again when the top of the bobbin faces in', () => {
		const bench = started({}, { direction: 'clockwise', topFaces: 'in' });
		bench.turn(40);
		expect(bench.run.turns).toBe(40);
	});

	it('shows turns taken back and calls the cues again after five', () => {
		const bench = started({}, { lookEvery: 0 });
		bench.turn(1165, 600, false);
		expect(bench.count('eased')).toBe(1);
		bench.stand();
		bench.turn(-4);
		bench.stand();
		expect(bench.run.turns).toBe(1161);
		expect(bench.run.takenBack).toBe(4);
		bench.turn(1);
		expect(bench.count('eased')).toBe(1);
		bench.stand();
		bench.turn(-20);
		bench.stand();
		expect(bench.count('taken-back')).toBe(2);
		bench.turn(30, 600, false);
		expect(bench.count('eased')).toBe(2);
	});

	it('remarks when the spindle turns the wrong way for the coil', () => {
		const bench = new Bench();
		bench.hi();
		bench.coil();
		bench.turn(-8);
		expect(bench.view.notices).toContain('wrong-way');
		expect(bench.run.state).toBe('waiting');
		bench.stand();
		bench.turn(3);
		expect(bench.run.turns).toBe(3);
	});

	it('remarks it after a start tap as well', () => {
		const bench = started();
		bench.turn(-8);
		expect(bench.view.notices).toContain('wrong-way');
		expect(bench.count('wrong-way')).toBe(1);
		expect(bench.run.turns).toBe(-8);
	});

	it('subtracts what is taken off with one sensor once it is told so', () => {
		const bench = started({ seesDirection: false });
		bench.turn(90, 600, false);
		bench.stand();
		bench.tap({ kind: 'taking-off' });
		bench.wait(100);
		bench.tick();
		expect(bench.run.state).toBe('taking-off');
		bench.turn(-20);
		bench.stand();
		expect(bench.run.onBobbin).toBe(70);
		expect(bench.run.takenBack).toBe(20);
		bench.tap({ kind: 'taking-off-done' });
		bench.wait(100);
		bench.tick();
		bench.turn(5);
		expect(bench.run.onBobbin).toBe(75);
	});
});

describe('looks', () => {
	it('come again when the count falls well below them', () => {
		const bench = started();
		bench.turn(101);
		bench.stand();
		bench.tap({ kind: 'look', note: 'guided-again' });
		bench.turn(-30);
		bench.stand();
		bench.turn(28);
		expect(bench.run.cue).toBe('look');
	});

	it('are passed over when nobody stands for them', () => {
		const bench = started();
		bench.turn(140, 600, false);
		expect(bench.count('look-passed')).toBe(1);
		expect(bench.run.cue).toBeNull();
		expect(bench.run.nextLook).toBe(500);
	});
});

describe('lines', () => {
	it('sent again change nothing', () => {
		const bench = started();
		bench.turn(20);
		const before = bench.run.turns;
		const again = bench.give({ verb: 'T', b: bench.b, n: 3, e: 1, f: 1, v: 0, r: 100, t: 700 });
		expect(again.outcome).toBe('duplicate');
		expect(bench.run.turns).toBe(before);
	});

	it('with the number of another line are noticed and the first stays', () => {
		const bench = started();
		bench.turn(20);
		const again = bench.give({ verb: 'T', b: bench.b, n: bench.n, e: 1, f: 9_999, v: 0, r: 100, t: bench.t });
		expect(again.outcome).toBe('duplicate');
		expect(again.mismatch).toBe(true);
		expect(bench.run.turns).toBe(20);
	});

	it('ask once for the events of a gap, and acknowledge none beyond it', () => {
		const bench = started();
		bench.down = true;
		bench.event('btn');
		bench.down = false;
		bench.held = [];
		bench.tick();
		expect(bench.commands()).toContainEqual({ verb: 'SYNC', b: bench.b, e: 0 });
		expect(bench.commands().filter((line) => line.verb === 'SYNC')).toEqual([]);
		bench.event('btn');
		expect(bench.state.boots[0]).toMatchObject({ e: 0, eTop: 2 });
		bench.give({ verb: 'NO', b: bench.b, why: 'gone' });
		expect(bench.count('event-lost')).toBe(1);
		expect(bench.state.boots[0]).toMatchObject({ e: 2 });
	});

	it('are thinned to one a second or ten turns and around each event', () => {
		const bench = new Bench();
		bench.hi();
		bench.event('go');
		const outcomes: string[] = [];
		for (let i = 1; i <= 20; i += 1) {
			bench.now += 100;
			bench.f += i % 2;
			bench.n += 1;
			outcomes.push(
				bench.give({ verb: 'T', b: bench.b, n: bench.n, e: 1, f: bench.f, v: 0, r: 300, t: bench.t }).outcome
			);
		}
		// The one after the event, then one a second.
		expect(outcomes.filter((outcome) => outcome === 'stored')).toHaveLength(2);
		expect(outcomes[0]).toBe('stored');
	});

	it('show 6,000 at once when a known boot at 3,000 comes back with a birth line', () => {
		const bench = new Bench();
		bench.hi();
		bench.coil({ target: 8000 });
		bench.turn(3000, 600, false);
		bench.down = true;
		bench.turn(3000, 600, false);
		bench.down = false;
		bench.hi({ r: 600 });
		expect(bench.run.turns).toBe(6000);
		expect(bench.view.notices).toContain('catching-up');
		bench.wait(2_000);
		expect(bench.view.notices).not.toContain('catching-up');
		expect(bench.count('caught-up')).toBe(1);
	});

	it('of a device clock that wraps go on', () => {
		const bench = new Bench();
		bench.bornAt = bench.now - (2 ** 32 - 5_000);
		const wrapped = () => bench.t % 2 ** 32;
		bench.give({ verb: 'HI', p: 1, dev: 'w', b: bench.b, n: 0, e: 0, f: 0, v: 0, t: wrapped() });
		bench.coil();
		for (let i = 1; i <= 100; i += 1) {
			bench.now += 100;
			bench.n += 1;
			bench.give({ verb: 'T', b: bench.b, n: bench.n, e: 0, f: i, v: 0, r: 600, t: wrapped() });
		}
		expect(bench.run.turns).toBe(100);
		expect(bench.run.windingMs).toBe(9_900);
	});
});

describe('a tap while the link is down', () => {
	it('gives 5,320 to the first coil and the rest to the second when the lines come', () => {
		const bench = new Bench();
		bench.hi();
		bench.coil({ target: 5320 });
		bench.turn(5100, 1000, false);
		bench.down = true;
		bench.turn(220, 600);
		bench.stand(10_000);
		expect(bench.view.link).toBe('no-signal');
		const answer = bench.tap({ kind: 'keep' });
		expect(answer).toEqual({ ok: true, pending: true });
		bench.wait(4_000);
		bench.turn(300, 600, false);
		bench.down = false;
		// Birth line first, then events, then ticks newest first.
		bench.hi({ r: 600 });
		expect(bench.run.state).not.toBe('kept');
		expect(bench.run.cue).toBeNull();
		for (const line of bench.held.filter((held) => held.verb === 'E')) bench.give(line);
		expect(bench.run.state).toBe('kept');
		expect(bench.run.turns).toBe(5320);
		bench.coil({ target: 5240 }, 'run-2');
		for (const line of bench.held.filter((held) => held.verb === 'T').reverse()) bench.give(line);
		expect(bench.run.runId).toBe('run-2');
		expect(bench.run.turns).toBe(300);
		expect(bench.run.state).toBe('winding');
		bench.turn(10, 600, false);
		expect(bench.run.turns).toBe(310);
		expect(bench.view.last).toMatchObject({ onBobbin: 5320, sticker: 'K7QF' });
	});

	it('finds the looks the maker stood for in the events that come later', () => {
		const bench = started();
		bench.turn(60, 600, false);
		bench.down = true;
		bench.turn(41);
		bench.stand(3_000);
		bench.turn(120, 600, false);
		bench.down = false;
		bench.hi({ r: 600 });
		for (const line of bench.held.filter((held) => held.verb === 'E')) bench.give(line);
		expect(bench.run.turns).toBe(221);
		expect(bench.run.looks).toEqual([{ mark: 100, turns: 101, note: null }]);
		expect(bench.count('look-passed')).toBe(0);
	});

	it('is placed at the last line before it when the lines around it never come', () => {
		const bench = started({}, { target: 300, lookEvery: 0 });
		bench.turn(290, 600, false);
		bench.down = true;
		bench.turn(10, 600);
		bench.stand(6_000);
		bench.tap({ kind: 'keep' });
		bench.turn(50, 600, false);
		bench.down = false;
		bench.held = [];
		bench.tick();
		expect(bench.run.pendingTap).toBe('keep');
		bench.commands();
		bench.give({ verb: 'NO', b: bench.b, why: 'gone' });
		bench.wait(10_500);
		expect(bench.run.state).toBe('kept');
	});
});

describe('a winder that says goodbye', () => {
	it('is signed off at once, not lost, and comes back with its next line', () => {
		const bench = started();
		bench.turn(20);
		bench.stand();
		bench.give({ verb: 'BYE', b: bench.b });
		expect(bench.view.link).toBe('no-signal');
		expect(bench.view.notices).toContain('signed-off');
		bench.wait(2_000);
		bench.tick();
		expect(bench.view.link).toBe('live');
		expect(bench.view.notices).not.toContain('signed-off');
	});

	it('lets a tap made after it, or waiting for it, stand at its last count', () => {
		for (const order of ['before', 'after']) {
			const bench = started({}, { lookEvery: 0 });
			bench.turn(1200);
			bench.stand();
			bench.wait(300);
			if (order === 'before') expect(bench.tap({ kind: 'keep' })).toEqual({ ok: true, pending: true });
			bench.give({ verb: 'BYE', b: bench.b });
			if (order === 'after') expect(bench.tap({ kind: 'keep' })).toEqual({ ok: true, pending: false });
			expect(bench.run.state).toBe('kept');
			expect(bench.run.turns).toBe(1200);
		}
	});
});

describe('keep', () => {
	const onCount = () => {
		const bench = started({}, { lookEvery: 0 });
		bench.turn(1201);
		bench.stand();
		return bench;
	};

	it('twice keeps once', () => {
		const bench = onCount();
		bench.tap({ kind: 'keep' }, 'same');
		bench.tap({ kind: 'keep' }, 'same');
		expect(bench.tap({ kind: 'keep' }, 'another')).toEqual({ ok: false, why: 'not-now' });
		bench.wait(300);
		bench.tick();
		bench.tap({ kind: 'keep' }, 'same');
		expect(bench.count('kept')).toBe(1);
	});

	it('is not to be had while the spindle turns', () => {
		const bench = started({}, { lookEvery: 0 });
		bench.turn(1200);
		expect(bench.tap({ kind: 'keep' })).toEqual({ ok: false, why: 'turning' });
	});

	it('can be undone for ten seconds', () => {
		const bench = onCount();
		bench.tap({ kind: 'keep' });
		bench.wait(300);
		bench.tick();
		bench.coil({}, 'run-2');
		expect(bench.run.state).toBe('kept');
		expect(bench.tap({ kind: 'undo' }).ok).toBe(true);
		expect(bench.run.state).toBe('on-count');
		bench.turn(2);
		bench.stand();
		expect(bench.run.turns).toBe(1203);
		bench.tap({ kind: 'keep' });
		bench.wait(300);
		bench.tick();
		expect(bench.run.state).toBe('kept');
		bench.wait(10_500);
		expect(bench.run.runId).toBe('run-2');
		expect(bench.run.turns).toBe(0);
		expect(bench.tap({ kind: 'undo' })).toEqual({ ok: false, why: 'not-now' });
	});

	it('can be undone no more once the next coil turns', () => {
		const bench = onCount();
		bench.tap({ kind: 'keep' });
		bench.wait(300);
		bench.tick();
		bench.coil({}, 'run-2');
		bench.turn(2);
		expect(bench.run.runId).toBe('run-2');
		expect(bench.run.turns).toBe(2);
		expect(bench.tap({ kind: 'undo' }).ok).toBe(false);
	});
});

describe('a restart in the middle of a coil', () => {
	it('asks with the last count and how far it is uncertain', () => {
		const bench = started({}, { target: 5000 });
		bench.turn(3187, 450, false);
		bench.restart('77AA01F3', 1_200);
		bench.hi();
		expect(bench.run.question).toBe('restarted');
		// ⌈450/60 · 1.2 s⌉ = 9
		expect(bench.run.questionDetail).toEqual({ kind: 'restarted', at: 3187, uncertainTurns: 9 });
		bench.turn(10, 450, false);
		expect(bench.run.turns).toBe(3197);
		bench.stand();
		bench.tap({ kind: 'true-count', turns: 3203 });
		expect(bench.run.question).toBeNull();
		expect(bench.run.turns).toBe(3203);
		bench.turn(7, 450, false);
		expect(bench.run.turns).toBe(3210);
	});

	it('has no bound after more than five seconds', () => {
		const bench = started();
		bench.turn(90, 450, false);
		bench.restart('77AA01F3', 8_000);
		bench.hi();
		expect(bench.run.questionDetail).toMatchObject({ at: 90, uncertainTurns: null });
		bench.tap({ kind: 'go-on' });
		expect(bench.run.question).toBeNull();
		expect(bench.run.turns).toBe(90);
	});

	it('twice before an answer adds up what is uncertain', () => {
		const bench = started({}, { target: 5000 });
		bench.turn(600, 450, false);
		bench.restart('77AA01F3', 1_200);
		bench.hi();
		bench.turn(30, 450, false);
		bench.restart('77AA01F4', 1_200);
		bench.hi();
		expect(bench.run.questionDetail).toEqual({ kind: 'restarted', at: 630, uncertainTurns: 18 });
	});

	it('with retained totals is bridged silently', () => {
		const bench = started({}, { target: 5000 });
		bench.turn(3187, 450, false);
		bench.restart('77AA01F3', 1_200);
		bench.hi({ pb: '5C0E91A7', pf: 3195, pv: 0 });
		expect(bench.run.question).toBeNull();
		expect(bench.run.turns).toBe(3195);
		expect(bench.kinds()).toContain('bridged');
		bench.turn(5, 450, false);
		expect(bench.run.turns).toBe(3200);
	});

	it('loses no turn over boots A, B never heard, and C', () => {
		const bench = started({}, { target: 5000 });
		bench.turn(1000, 450, false);
		// B turned 40 and was never heard; C says what A's totals have come to.
		bench.restart('0000000C', 60_000);
		bench.hi({ pb: '5C0E91A7', pf: 1040, pv: 0 });
		bench.turn(10, 450, false);
		expect(bench.run.turns).toBe(1050);
	});

	it('counts lines of the boot before that come late', () => {
		const bench = started({}, { target: 5000 });
		bench.turn(100, 450, false);
		bench.down = true;
		bench.turn(6, 450, false);
		const late = bench.held.slice();
		bench.down = false;
		bench.restart('77AA01F3', 1_000);
		bench.hi();
		bench.turn(4, 450, false);
		for (const line of late) bench.give(line);
		expect(bench.run.turns).toBe(110);
	});

	it('says nothing when no coil has begun', () => {
		const bench = new Bench();
		bench.hi();
		bench.coil();
		bench.restart('77AA01F3');
		bench.hi();
		expect(bench.run.question).toBeNull();
		bench.turn(5);
		expect(bench.run.turns).toBe(5);
	});
});

describe('a count that jumps', () => {
	const jumped = () => {
		const bench = started({}, { target: 9000, lookEvery: 0 });
		bench.turn(3187, 1000, false);
		bench.f += 5000;
		bench.now += 1_000;
		bench.tick();
		return bench;
	};

	it('is held and asked about', () => {
		const bench = jumped();
		expect(bench.run.turns).toBe(3187);
		expect(bench.run.question).toBe('jump');
		expect(bench.run.questionDetail).toEqual({ kind: 'jump', keep: 3187, take: 8187 });
	});

	it('is taken when the maker says so', () => {
		const bench = jumped();
		bench.turn(3, 600, false);
		bench.tap({ kind: 'jump-take' });
		expect(bench.run.turns).toBe(8190);
	});

	it('is kept out when the maker says so, and what was wound since counts', () => {
		const bench = jumped();
		bench.turn(3, 600, false);
		bench.tap({ kind: 'jump-keep' });
		expect(bench.run.turns).toBe(3190);
		bench.turn(10, 600, false);
		expect(bench.run.turns).toBe(3200);
	});

	it('is forgotten when the lines go on at the old level', () => {
		const bench = jumped();
		bench.f -= 5000;
		bench.turn(5, 600, false);
		expect(bench.run.question).toBeNull();
		expect(bench.run.turns).toBe(3192);
		expect(bench.kinds()).toContain('jump-gone');
	});
});

describe('the sensor', () => {
	it('that loses its magnet at speed is no calm stop', () => {
		const bench = started({}, { target: 5000, lookEvery: 0 });
		bench.turn(200, 450, false);
		bench.stand();
		expect(bench.run.question).toBe('did-you-stop');
		expect(bench.run.questionDetail).toMatchObject({ at: 200 });
		bench.tap({ kind: 'stopped' });
		expect(bench.run.question).toBeNull();
	});

	it('that sees a coast-down asks nothing', () => {
		const bench = started({}, { target: 5000, lookEvery: 0 });
		bench.turn(200, 450);
		bench.stand();
		expect(bench.run.question).toBeNull();
		expect(bench.run.state).toBe('paused');
	});

	it('that gives two pulses a turn is noticed by speed against count', () => {
		const bench = started({}, { target: 5000, lookEvery: 0 });
		for (let i = 0; i < 60; i += 1) {
			bench.now += 100;
			bench.f += 2;
			bench.r = 600;
			bench.turning = true;
			bench.tick();
		}
		expect(bench.view.notices).toContain('pulses-per-turn');
		expect(bench.facts.find((fact) => fact.kind === 'pulses-per-turn')?.detail).toEqual({ factor: 2 });
	});

	it('that bounces or misses is noticed and the count stays', () => {
		const bench = started();
		bench.tick({ x: 0, g: 0 });
		bench.turn(3);
		bench.tick({ x: 9, g: 2 });
		expect(bench.view.notices).toEqual(expect.arrayContaining(['bouncing', 'missed-pulses']));
		expect(bench.run.turns).toBe(3);
		expect(bench.run.faults).toEqual(expect.arrayContaining(['bouncing', 'missed-pulses']));
	});
});

describe('a clock that runs twice as fast', () => {
	it('is noticed and the count stays right', () => {
		const bench = started({}, { lookEvery: 0 });
		for (let i = 1; i <= 200; i += 1) {
			bench.now += 100;
			bench.f += 1;
			bench.n += 1;
			bench.give({ verb: 'T', b: bench.b, n: bench.n, e: bench.e, f: bench.f, v: 0, r: 600, t: 500 + i * 200 });
		}
		expect(bench.view.notices).toContain('clock-odd');
		expect(bench.run.turns).toBe(200);
	});
});

describe('two boards of one name', () => {
	it('are told apart and the first keeps the run', () => {
		const bench = started({}, { lookEvery: 0 });
		bench.turn(50, 600, false);
		const first = { b: bench.b, n: bench.n, f: bench.f, bornAt: bench.bornAt };
		const otherBorn = bench.now;
		for (let i = 1; i <= 6; i += 1) {
			bench.now += 100;
			bench.give({ verb: 'T', b: 'DDDD0001', n: i, e: 0, f: i, v: 0, r: 600, t: bench.now - otherBorn });
			bench.now += 100;
			first.n += 1;
			first.f += 1;
			bench.give({ verb: 'T', b: first.b, n: first.n, e: 1, f: first.f, v: 0, r: 600, t: bench.now - first.bornAt });
		}
		expect(bench.view.notices).toContain('two-winders');
		expect(bench.run.question).toBeNull();
		expect(bench.run.turns).toBe(56);
		expect(bench.view.boot).toBe(first.b);
	});
});

describe('wire that snaps', () => {
	it('leaves what is counted and what is on the bobbin apart', () => {
		const bench = started({}, { target: 5000, lookEvery: 0 });
		bench.turn(1000, 600, false);
		bench.tap({ kind: 'snapped' });
		bench.wait(50);
		bench.tick();
		expect(bench.run.question).toBe('snapped');
		expect(bench.run.questionDetail).toEqual({ kind: 'snapped', guess: 990, counted: 1000 });
		bench.turn(12, 600);
		bench.stand();
		bench.tap({ kind: 'snap-at', turns: 996 });
		expect(bench.run.turns).toBe(1012);
		expect(bench.run.onBobbin).toBe(996);
		bench.turn(10, 600, false);
		expect(bench.run.onBobbin).toBe(1006);
		expect(bench.run.snaps).toEqual([{ saidAt: 1000, leftAt: 996, emptyTurns: 16 }]);
		const set = bench.commands().find((line) => line.verb === 'SET');
		expect(set).toMatchObject({ tgt: 5016 });
	});

	it('may turn out to have held', () => {
		const bench = started({}, { target: 5000, lookEvery: 0 });
		bench.turn(100, 600, false);
		bench.tap({ kind: 'snapped' });
		bench.wait(50);
		bench.tick();
		bench.tap({ kind: 'no-snap' });
		expect(bench.run.onBobbin).toBe(100);
		expect(bench.run.question).toBeNull();
	});

	it('refuses a place beyond what was counted', () => {
		const bench = started({}, { target: 5000, lookEvery: 0 });
		bench.turn(100, 600, false);
		bench.tap({ kind: 'snapped' });
		bench.wait(50);
		bench.tick();
		expect(bench.tap({ kind: 'snap-at', turns: 101 })).toEqual({ ok: false, why: 'range' });
	});
});

describe('the plan told to the device', () => {
	it('is sent until it is answered, and anew when it changes', () => {
		const bench = started();
		const first = bench.commands().find((line) => line.verb === 'SET')!;
		expect(first).toMatchObject({ b: bench.b, tgt: 1200, look: 500, ease: 40, stop: 3, from: 0, fst: 100 });
		expect(bench.commands().map((line) => line.verb)).toContain('SET');
		bench.give({ verb: 'OK', b: bench.b, id: (first as { id: number }).id });
		expect(bench.commands()).toEqual([]);
		const changed = changePlan(bench.state, bench.config, { ...bench.run.coil, target: 1300 }, bench.now)!;
		bench.state = changed.state;
		expect(bench.commands()[0]).toMatchObject({ verb: 'SET', tgt: 1300 });
	});

	it('goes under a number beyond those a winder heard before an older backup was restored', () => {
		const bench = started();
		const sent = () => bench.commands().find((line) => line.verb === 'SET') as { id: number } | undefined;
		const first = sent()!;
		bench.give({ verb: 'NO', b: bench.b, id: first.id, why: 'old' });
		const second = sent()!;
		expect(second).toMatchObject({ tgt: 1200 });
		expect(second.id).toBeGreaterThan(first.id + 900);
		// The answer to what was overtaken on the way says nothing about the plan that waits.
		bench.give({ verb: 'NO', b: bench.b, id: first.id, why: 'old' });
		expect(sent()).toEqual(second);
		bench.give({ verb: 'OK', b: bench.b, id: second.id });
		expect(sent()).toBeUndefined();
	});

	it('asks the device to speak while a tap waits for a line', () => {
		const bench = started({}, { lookEvery: 0 });
		bench.turn(1200);
		bench.stand();
		bench.wait(100);
		bench.tap({ kind: 'keep' });
		expect(bench.commands('changed').map((line) => line.verb)).toContain('?');
		bench.wait(20);
		bench.hi();
		expect(bench.run.state).toBe('kept');
	});

	it('says over at once when the target is changed below the count', () => {
		const bench = started({}, { lookEvery: 0 });
		bench.turn(437, 600, false);
		const changed = changePlan(bench.state, bench.config, { ...bench.run.coil, target: 400 }, bench.now)!;
		bench.state = changed.state;
		expect(changed.facts.filter((fact) => fact.kind === 'over')).toHaveLength(1);
		expect(bench.run.cue).toBe('over');
		expect(bench.run.left).toBe(-37);
	});
});

describe('the coil on the bench', () => {
	it('goes back to the queue only before it turns', () => {
		const bench = new Bench();
		bench.hi();
		bench.coil();
		expect(dropWaiting(bench.state)).toMatchObject({ runId: 'run-1', coilId: 'coil-1' });
		bench.turn(2);
		expect(dropWaiting(bench.state)).toBeNull();
	});

	it('is asked about when another winder turns without one', () => {
		const bench = new Bench();
		bench.hi();
		bench.coil();
		const asked = askWhichWinder(bench.state, bench.config, { winderId: 'w2', name: 'w-02', turns: 6 }, bench.now)!;
		bench.state = asked.state;
		expect(bench.run.question).toBe('which-winder');
		bench.tap({ kind: 'other-winder' });
		expect(bench.view.run).toBeNull();
	});
});

describe('a server that was killed', () => {
	it('goes on from the state as JSON and a newer cursor', () => {
		const bench = started({}, { lookEvery: 0 });
		bench.turn(200, 600, false);
		const snapshot = JSON.parse(JSON.stringify(bench.state));
		bench.turn(7, 600, false);
		const cursor = bench.state.boots[0]!;
		bench.state = mergeCursor(snapshot, cursor);
		expect(bench.run.turns).toBe(207);
		bench.turn(3, 600, false);
		expect(bench.run.turns).toBe(210);
		expect(bench.run.question).toBeNull();
	});
});
