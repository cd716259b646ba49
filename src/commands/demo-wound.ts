import type { RunFigures } from '../lib/winding/types.ts';
import type { PastRun } from '../lib/server/db/admin.ts';

/** How an invented coil of the demo went: an invented hand on an invented winder, second by second, the same each time. */

export interface WindingPlan {
	target: number;
	lookEvery: number;
	/** 0: none. */
	firstLook: number;
	/** Turns over the target (or short of it) where the spindle came to rest. */
	over: number;
	/** Of this hand, between looks. */
	rpm: number;
	memberId: string;
	/** When the start was tapped. */
	startedAt: Date;
}

export type Wound = Pick<PastRun, 'startedAt' | 'endedAt' | 'figures' | 'trace' | 'facts'>;

const stepMs = 250;
/** A point each second: some six hundred for a coil, fewer than a trace holds. */
const pointEveryMs = 1000;
/** What the motor gains and loses in a second, in turns a second. */
const gainPerS = 5;
const losePerS = 4;
/** How long a look takes, in turn. */
const lookMs = [11_000, 14_000, 9_000, 16_000, 12_000] as const;
/** What the demo's winder is set to. */
const easeEarlyTurns = 40;
const stopEarlyTurns = 3;
const keepAfterMs = 6_000;
const crawlPerS = 0.6;

export function woundCoil(plan: WindingPlan): Wound {
	const { target, memberId } = plan;
	const end = target + plan.over;
	const marks: number[] = [];
	if (plan.firstLook > 0) marks.push(plan.firstLook);
	if (plan.lookEvery > 0) for (let at = plan.lookEvery; at < target; at += plan.lookEvery) marks.push(at);

	const facts: Wound['facts'] = [];
	const trace: Wound['trace'] = { atMs: [0], turns: [0], rpm: [0] };
	const figures: RunFigures = {
		turns: end,
		onBobbin: end,
		windingMs: 0,
		stoppedMs: 0,
		rpmMean: 0,
		rpmTop: 0,
		looks: [],
		snaps: [],
		takenBack: 0,
		faults: []
	};
	let ms = 0;
	let turns = 0;
	let perS = 0;
	const point = () => {
		trace.atMs.push(ms);
		trace.turns.push(Math.floor(turns + 1e-6));
		trace.rpm.push(Math.round(60 * perS));
	};
	const say = (kind: Wound['facts'][number]['kind'], detail: Wound['facts'][number]['detail'] = {}, by = false) =>
		facts.push({
			kind,
			at: new Date(plan.startedAt.getTime() + ms),
			turns: Math.floor(turns + 1e-6),
			detail,
			memberId: by ? memberId : null
		});
	const stand = (forMs: number) => {
		ms += forMs;
		figures.stoppedMs += forMs;
	};

	/** On to a place, slowing down before it. */
	const windTo = (place: number) => {
		const last = place === end;
		let eased = false;
		let stopped = false;
		while (turns < place - 1e-6) {
			const left = place - turns;
			// The hand is never quite even: some three in a hundred, over minutes.
			const cruise = (plan.rpm / 60) * (1 + 0.03 * Math.sin(ms / 23_000) + 0.015 * Math.sin(ms / 6_100));
			const braking = Math.sqrt(2 * losePerS * left) * 0.8;
			const wanted = Math.max(crawlPerS, Math.min(cruise, braking));
			perS = Math.min(wanted, perS + (gainPerS * stepMs) / 1000);
			turns = Math.min(place, turns + (perS * stepMs) / 1000);
			ms += stepMs;
			figures.windingMs += stepMs;
			figures.rpmTop = Math.max(figures.rpmTop, Math.round(60 * perS));
			if (last && !eased && turns >= target - easeEarlyTurns) {
				eased = true;
				say('eased');
			}
			if (last && !stopped && turns >= target - stopEarlyTurns) {
				stopped = true;
				say('stop-cue');
			}
			if (ms % pointEveryMs === 0) point();
		}
		perS = 0;
		point();
		say('stopped');
	};

	say('started', {}, true);
	for (const [i, mark] of marks.entries()) {
		// The spindle runs on a turn or two after each cue.
		windTo(mark + (i % 3));
		stand(lookMs[i % lookMs.length]!);
		say('look-seen', { mark, note: 'even' }, true);
		figures.looks.push({ mark, turns: mark + (i % 3), note: 'even' });
		stand(2_000);
		point();
		say('went-on');
	}
	windTo(end);
	if (plan.over > 0) say('over', { over: plan.over });
	say('on-count', { left: -plan.over });
	stand(keepAfterMs);
	say('kept', {}, true);
	figures.rpmMean = Math.round((end / figures.windingMs) * 60_000);
	return { startedAt: plan.startedAt, endedAt: new Date(plan.startedAt.getTime() + ms), figures, trace, facts };
}
