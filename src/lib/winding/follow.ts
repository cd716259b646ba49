import { closeSnap } from './acts.ts';
import { axisAt, wallAt, type BootState, type Point } from './boot.ts';
import { lookPassedAfterTurns, rearmTurns } from './cues.ts';
import { followLooks, followMarks } from './looks.ts';
import { endedAtSpeed } from './plausible.ts';
import { addMove, cuesOf, onBobbinOf, signOf, takenBackOf, turnsOf, type RunCore } from './run.ts';
import { type Draft, say, sayFault, notice, onBobbinNow, ask, clearQuestion, promote } from './state.ts';

/** The newest moment of a boot in the life of its run: begun, stood, went on, taken back. */

/** A coil that began by turning and has come this far is meant: the question whether to start here goes away. */
const settledTurns = 200;

/** An event of before the latest moment: it says when the spindle went and stood, and for which look. */
export function moveSeen(d: Draft, boot: BootState, point: Point): void {
	if (point.k !== 'go' && point.k !== 'stop') return;
	const axis = axisAt(boot, point.t, d.config.timeScale);
	for (const run of [d.s.run, d.s.upNext]) {
		if (!run || run.startAxis === null || axis < run.startAxis || (run.endAxis !== null && axis > run.endAxis))
			continue;
		addMove(run, axis, point.k === 'go' ? 1 : 0);
		if (point.k !== 'stop') continue;
		const turns = onBobbinOf(run, turnsOf(run, d.s.boots, { b: boot.b, f: point.f, v: point.v }));
		const mark = run.lookUnseen.find(
			(unseen) => turns >= unseen - rearmTurns && turns <= unseen + lookPassedAfterTurns
		);
		if (mark === undefined) continue;
		run.lookUnseen = run.lookUnseen.filter((unseen) => unseen !== mark);
		run.looks.push({ mark, turns, note: null });
		run.looks.sort((a, b) => a.turns - b.turns);
		say(d, 'look-seen', wallAt(boot, point.t, d.config.timeScale), { turns, detail: { mark, note: null } });
	}
}

/** The newest moment of the current boot, in the life of its run. */
export function follow(d: Draft, boot: BootState, point: Point, wasTurning: boolean, deviceGapMs: number): void {
	const { s, config } = d;
	const at = wallAt(boot, point.t, config.timeScale);
	const axis = axisAt(boot, point.t, config.timeScale);

	if (s.upNext && s.run?.status !== 'open' && turnsOf(s.upNext, s.boots) >= 1) promote(d);
	const run = s.run;
	if (!run || run.status !== 'open') {
		if (s.end && boot.turning !== wasTurning)
			s.end = { ...s.end, moves: [...s.end.moves, [axis, boot.turning ? 1 : 0]] };
		return;
	}

	// While a keep waits for lines, what comes may belong to the next coil: only its moves are noted.
	const ending = run.pending !== null && (run.pending.tap.kind === 'keep' || run.pending.tap.kind === 'set-aside');

	const hadBegun = run.moves.length > 0;
	if (run.startedAt === null) begin(d, run, boot, point, at);
	if (run.startedAt === null) return;

	run.rpmTop = Math.max(run.rpmTop, ending ? 0 : Math.abs(point.r));
	const went = boot.turning && !wasTurning;
	const stood = !boot.turning && wasTurning;
	if (went) {
		addMove(run, axis, 1);
		if (hadBegun && !ending) say(d, 'went-on', at);
		run.standingSince = null;
		if (run.question === 'did-you-stop') clearQuestion(run);
	}
	if (stood) {
		addMove(run, axis, 0);
		run.standingSince = axis;
	}
	if (run.moves.length === 0 && boot.turning) addMove(run, run.startAxis ?? axis, 1);
	if (!boot.turning && run.standingSince === null) run.standingSince = axis;
	if (ending) return;

	const onBobbin = onBobbinNow(d, run);
	if (stood) {
		say(d, 'stopped', at);
		judgeStop(d, run, onBobbin, at);
	}

	const back = takenBackOf(run, s.boots, !config.seesDirection);
	if (back > run.takenBackSaid && (!boot.turning || point.r > 0 === signOf(run.plan, config) > 0)) {
		say(d, 'taken-back', at, { detail: { turns: back - run.takenBackSaid, total: back } });
		run.takenBackSaid = back;
	}
	if (boot.turning) remarkWrongWay(d, run, onBobbin, at);
	if (run.snapOpen?.answered && !boot.turning) closeSnap(d, run);
	if (onBobbin >= settledTurns || run.looks.length > 0) run.settled = true;
	if (!run.takingOff) {
		followLooks(d, run, boot, onBobbin, at, deviceGapMs);
		followMarks(d, run, boot, onBobbin, at);
	}
}

/** A run begins when its spindle begins to move; a start tap may say otherwise. */
function begin(d: Draft, run: RunCore, boot: BootState, point: Point, at: number): void {
	if (run.pending?.tap.kind === 'start') return;
	const turns = turnsOf(run, d.s.boots);
	if (turns >= 1) {
		// When it moved: the first go since the count was at zero.
		let movedT = point.t;
		for (let i = d.s.trail.length - 1; i >= 0; i -= 1) {
			const earlier = d.s.trail[i]!;
			if (turnsOf(run, d.s.boots, { b: boot.b, f: earlier.f, v: earlier.v }) < 1) {
				if (earlier.k === 'go' || earlier.r !== 0) movedT = earlier.t;
				if (earlier.k === 'go' || earlier.k === 'stop') break;
			} else movedT = earlier.t;
		}
		const movedAxis = run.moves[0]?.[0] ?? axisAt(boot, movedT, d.config.timeScale);
		run.startedAt = wallAt(boot, movedT, d.config.timeScale);
		run.startAxis = movedAxis;
		if (run.moves.length === 0) addMove(run, movedAxis, 1);
		say(d, 'moved', run.startedAt, { turns: 0 });
	} else remarkWrongWay(d, run, turns, at);
	// Turned back by hand and standing: zero is where it stands.
	if (turns < 0 && !boot.turning) {
		for (const stretch of run.stretches) {
			if (stretch.b !== boot.b || stretch.toF !== null) continue;
			stretch.fromF = boot.f;
			stretch.fromV = boot.v;
		}
	}
}

/** Turned the other way than the coil asks, from its zero: the wire goes on backwards. */
function remarkWrongWay(d: Draft, run: RunCore, turns: number, at: number): void {
	if (turns > -rearmTurns) return;
	notice(d, 'wrong-way');
	if (run.said.wrongWay) return;
	run.said.wrongWay = true;
	sayFault(d, 'wrong-way', at, { turns: -turns });
}

/** Standing after turning: did it coast down, or did the pulses end? */
function judgeStop(d: Draft, run: RunCore, onBobbin: number, at: number): void {
	const cue = cuesOf(run, d.config, onBobbin, true).cue;
	// A stop that was asked for may well be a brake.
	if (run.question !== null || run.takingOff || (cue !== null && cue !== 'look-coming')) return;
	const rpm = endedAtSpeed(d.s.trail);
	if (rpm === null) return;
	ask(run, { kind: 'did-you-stop', at: onBobbin, rpm });
	sayFault(d, 'pulses-ended', at, { rpm });
}
