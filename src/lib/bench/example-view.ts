import type { LiveView, RunView } from '../winding/types.ts';

/** A run in the middle of winding, for tests. */
export function aRun(part: Partial<RunView> = {}): RunView {
	const target = part.target ?? 5_320;
	const onBobbin = part.onBobbin ?? 3_412;
	return {
		runId: 'run-1',
		coil: {
			coilId: 'coil-1',
			name: 'Bridge · screw coil',
			note: '',
			target,
			lookEvery: 500,
			direction: 'counter-clockwise',
			topFaces: 'out',
			toleranceTurns: 5,
			firstLook: null,
			fullTurns: null
		},
		target,
		left: target - onBobbin,
		state: 'winding',
		question: null,
		questionDetail: null,
		cue: null,
		nextLook: 3_500,
		easeAt: target - 40,
		stopAt: target - 3,
		firstLook: 100,
		movedTurnsAgo: null,
		pendingTap: null,
		startedAt: Date.UTC(2026, 11, 2, 10, 41),
		undoUntil: null,
		sticker: null,
		setAsideReason: null,
		turns: onBobbin,
		onBobbin,
		windingMs: 456_000,
		stoppedMs: 60_000,
		rpmMean: 440,
		rpmTop: 610,
		looks: [],
		snaps: [],
		takenBack: 0,
		faults: [],
		...part
	};
}

/** A winder that turns and is heard, for tests. */
export function aView(part: Partial<LiveView> = {}): LiveView {
	return {
		seq: 7,
		server: 'server-1',
		at: Date.UTC(2026, 11, 2, 10, 50),
		winderId: 'winder-1',
		winderName: 'w-01',
		seesDirection: true,
		boot: '5C0E91A7',
		forward: 3_412,
		reverse: 0,
		net: 3_412,
		rpm: 452,
		turning: true,
		ageMs: 40,
		link: 'live',
		notices: [],
		unsaved: 0,
		saving: true,
		run: aRun(),
		last: null,
		next: { name: 'Slug coil', target: 5_240 },
		waiting: 1,
		timeScale: 1,
		...part
	};
}
