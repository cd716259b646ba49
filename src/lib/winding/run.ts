import { cuesAt, type CuesNow } from './cues.ts';
import type {
	CoilPlan,
	CuePlan,
	FactKind,
	Look,
	Question,
	QuestionDetail,
	RunFigures,
	RunState,
	Snap,
	Tap,
	WinderConfig
} from './types.ts';
import { axisAt, type BootState, type Point } from './boot.ts';

/** One attempt at winding one coil, as the fold carries it. Turns are signed the coil's way: up is wire going on. */
export interface RunCore {
	runId: string;
	plan: CoilPlan;
	sticker: string;
	takenAt: number;
	/** Stretches of counting, each within one boot and with one sign. Their sum, with `adjust`, is the count. */
	stretches: Stretch[];
	/** Turns the maker put right: a typed count, a jump kept out. */
	adjust: number;
	status: 'open' | 'kept' | 'set-aside';
	startedAt: number | null;
	/** Moment of the first turn on the common axis (boot.ts, axisAt). */
	startAxis: number | null;
	/** The start was tapped, or is no longer in doubt. */
	settled: boolean;
	firstLook: number;
	lookDone: number;
	/** The mark whose cue has come and not been dealt with. */
	lookDue: number | null;
	/** Standing for this look. */
	look: { mark: number; turns: number; answered: boolean } | null;
	looks: Look[];
	/** Marks passed while no lines came: an event that arrives later may show that the maker stood for them. */
	lookUnseen: number[];
	snaps: Snap[];
	/** The wire is off since `leftAt` (turns on the bobbin); `answered` once the maker has said where. */
	snapOpen: { saidAt: number; leftAt: number; answered: boolean } | null;
	/** Empty turns of the snaps dealt with. */
	emptyTurns: number;
	/** [axis, 1 go | 0 stop], ascending: what time was winding and what standing. Oldest pairs fold into `movesFoldedMs`. */
	moves: [number, 0 | 1][];
	movesFoldedMs: number;
	rpmTop: number;
	said: { ease: boolean; stop: boolean; over: boolean; onCount: boolean; wrongWay: boolean; ppr: boolean };
	faults: FactKind[];
	question: Question | null;
	questionDetail: QuestionDetail | null;
	takingOff: boolean;
	takenBackSaid: number;
	pending: PendingTap | null;
	endedAt: number | null;
	endAxis: number | null;
	endedBy: string | null;
	undoUntil: number | null;
	setAsideReason: string | null;
	/** Moment (axis) since which the spindle stands, null while it turns. */
	standingSince: number | null;
}

/** `from` are the totals at its zero, `to` those at its end, null while it counts on. */
export interface Stretch {
	b: string;
	sign: 1 | -1;
	fromF: number;
	fromV: number;
	toF: number | null;
	toV: number | null;
	/** The boot's device time 0 on the common axis, so that its lines are found when the boot itself is long forgotten. */
	zeroAxis: number;
}

/** A stretch that begins to count at these totals of a boot. */
export const newStretch = (
	boot: BootState,
	sign: 1 | -1,
	from: { f: number; v: number },
	timeScale: number
): Stretch => ({
	b: boot.b,
	sign,
	fromF: from.f,
	fromV: from.v,
	toF: null,
	toV: null,
	zeroAxis: axisAt(boot, 0, timeScale)
});

/** A tap placed on the device's time that waits until the lines reach it. */
export interface PendingTap {
	tap: Tap;
	/** Wall ms of the touch. */
	madeAt: number;
	b: string;
	/** Device ms of the touch. */
	t: number;
	before: Point | null;
	after: Point | null;
	/** Wall ms at which the first line beyond the tap came. */
	afterAt: number | null;
}

const movesMax = 400;

export function newRun(runId: string, plan: CoilPlan, sticker: string, now: number, firstLook: number): RunCore {
	return {
		runId,
		plan,
		sticker,
		takenAt: now,
		stretches: [],
		adjust: 0,
		status: 'open',
		startedAt: null,
		startAxis: null,
		settled: false,
		firstLook,
		lookDone: 0,
		lookDue: null,
		look: null,
		looks: [],
		lookUnseen: [],
		snaps: [],
		snapOpen: null,
		emptyTurns: 0,
		moves: [],
		movesFoldedMs: 0,
		rpmTop: 0,
		said: { ease: false, stop: false, over: false, onCount: false, wrongWay: false, ppr: false },
		faults: [],
		question: null,
		questionDetail: null,
		takingOff: false,
		takenBackSaid: 0,
		pending: null,
		endedAt: null,
		endAxis: null,
		endedBy: null,
		undoUntil: null,
		setAsideReason: null,
		standingSince: null
	};
}

/** A copy whose own fields and lists may be changed. */
export function copyRun(run: RunCore): RunCore {
	return {
		...run,
		stretches: run.stretches.map((stretch) => ({ ...stretch })),
		looks: run.looks.slice(),
		lookUnseen: run.lookUnseen.slice(),
		snaps: run.snaps.slice(),
		moves: run.moves.slice(),
		said: { ...run.said },
		faults: run.faults.slice(),
		pending: run.pending && { ...run.pending }
	};
}

/**
 * Which way the count goes up for this coil: a winder that sees direction counts a reverse-wound coil downwards, and a
 * bobbin sitting the other way round reverses it again. One sensor sees everything as forward.
 */
export function signOf(plan: CoilPlan, config: WinderConfig): 1 | -1 {
	if (!config.seesDirection) return 1;
	const asForward = plan.direction === config.forwardIs;
	return asForward === (plan.topFaces === 'out') ? 1 : -1;
}

type Reads = { b: string; f: number; v: number };

function endOf(stretch: Stretch, boots: readonly BootState[]): { f: number; v: number } {
	if (stretch.toF !== null && stretch.toV !== null) return { f: stretch.toF, v: stretch.toV };
	const boot = boots.find((candidate) => candidate.b === stretch.b);
	return boot ? { f: boot.f, v: boot.v } : { f: stretch.fromF, v: stretch.fromV };
}

/** Turns counted: signed sum of the stretches. `at` reads one boot at other totals than those of now. */
export function turnsOf(run: RunCore, boots: readonly BootState[], at?: Reads): number {
	let turns = run.adjust;
	for (const stretch of run.stretches) {
		const end = at && at.b === stretch.b && stretch.toF === null ? at : endOf(stretch, boots);
		turns += stretch.sign * (end.f - end.v - (stretch.fromF - stretch.fromV));
	}
	return turns;
}

/** Turns taken back: what the totals of the other way grew by, and stretches of taking off on one sensor. */
export function takenBackOf(run: RunCore, boots: readonly BootState[], oneSensor: boolean): number {
	let back = 0;
	for (const stretch of run.stretches) {
		const end = endOf(stretch, boots);
		if (oneSensor && stretch.sign === -1) back += end.f - stretch.fromF;
		else back += stretch.sign === 1 ? end.v - stretch.fromV : end.f - stretch.fromF;
	}
	return back;
}

/** Turns that carry wire: less the empty turns after a snap. */
export function onBobbinOf(run: RunCore, turns: number): number {
	const wound = turns - run.emptyTurns;
	return run.snapOpen ? Math.min(wound, run.snapOpen.leftAt) : wound;
}

export function cuePlanOf(run: RunCore, config: WinderConfig): CuePlan {
	return {
		target: run.plan.target,
		lookEvery: run.plan.lookEvery,
		firstLook: run.firstLook,
		easeEarlyTurns: config.easeEarlyTurns,
		stopEarlyTurns: config.stopEarlyTurns,
		lookDone: run.lookDone
	};
}

export const cuesOf = (run: RunCore, config: WinderConfig, onBobbin: number, turning: boolean): CuesNow =>
	cuesAt(cuePlanOf(run, config), onBobbin, turning);

/** The state in one word, from what is known now. */
export function stateOf(run: RunCore, config: WinderConfig, onBobbin: number, turning: boolean): RunState {
	if (run.status !== 'open') return run.status;
	if (run.startedAt === null) return 'waiting';
	if (run.takingOff) return 'taking-off';
	const cues = cuesOf(run, config, onBobbin, turning);
	if (turning) return onBobbin >= cues.easeAt ? 'easing' : 'winding';
	// Started with a tap and not yet moved: the maker is about to wind.
	if (run.moves.length === 0) return 'winding';
	if (Math.abs(cues.left) <= run.plan.toleranceTurns) return 'on-count';
	if (run.look && !run.look.answered) return 'at-look';
	return 'paused';
}

export function addMove(run: RunCore, axis: number, go: 0 | 1): void {
	let i = run.moves.length;
	while (i > 0 && run.moves[i - 1]![0] > axis) i -= 1;
	run.moves.splice(i, 0, [axis, go]);
	while (run.moves.length > movesMax) foldOldestMoves(run);
}

function foldOldestMoves(run: RunCore): void {
	// Up to and with the first stop that ends a stretch of turning.
	let wentAt: number | null = null;
	while (run.moves.length > 0) {
		const [axis, go] = run.moves.shift()!;
		if (go) wentAt ??= axis;
		else if (wentAt !== null) {
			run.movesFoldedMs += axis - wentAt;
			return;
		}
	}
}

/** Device milliseconds spent turning until `untilAxis`. Repeated gos or stops (a tick and its event) count once. */
export function windingMsOf(run: RunCore, untilAxis: number): number {
	let total = run.movesFoldedMs;
	let wentAt: number | null = null;
	for (const [axis, go] of run.moves) {
		if (axis > untilAxis) break;
		if (go) wentAt ??= axis;
		else if (wentAt !== null) {
			total += axis - wentAt;
			wentAt = null;
		}
	}
	if (wentAt !== null && untilAxis > wentAt) total += untilAxis - wentAt;
	return total;
}

/**
 * @param nowAxis latest moment heard of, on the common axis; a closed run is read at its end
 */
export function figuresOf(run: RunCore, boots: readonly BootState[], nowAxis: number, oneSensor: boolean): RunFigures {
	const turns = turnsOf(run, boots);
	const until = run.endAxis ?? nowAxis;
	const windingMs = run.startAxis === null ? 0 : windingMsOf(run, until);
	const allMs = run.startAxis === null ? 0 : Math.max(0, until - run.startAxis);
	const takenBack = takenBackOf(run, boots, oneSensor);
	const rpmMean = windingMs > 0 ? Math.round(((turns + takenBack) / windingMs) * 60_000) : 0;
	return {
		turns,
		onBobbin: onBobbinOf(run, turns),
		windingMs: Math.round(windingMs),
		stoppedMs: Math.round(Math.max(0, allMs - windingMs)),
		rpmMean,
		// A winder that says no speed has a top all the same.
		rpmTop: Math.max(run.rpmTop, rpmMean),
		looks: run.looks,
		snaps: run.snaps,
		takenBack,
		faults: run.faults
	};
}
