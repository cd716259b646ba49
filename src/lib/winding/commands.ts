import type { HostLine, SetPlan } from '../turnline/types.ts';
import { hasEventGap, net } from './boot.ts';
import { onBobbinOf, signOf, turnsOf } from './run.ts';
import type { WinderState } from './state.ts';
import type { WinderConfig } from './types.ts';

/** What the device is told. */

/** A lost SYNC would hold back every later acknowledgement: asked again, doubling, so many times. */
const syncAgainMs = 5_000;
const syncMax = 5;
/** A plan not answered and a tap that still waits are spoken of again each second. */
const setAgainMs = 1_000;
const askAgainMs = 1_000;

/**
 * What the device is to be told now.
 *
 * @param mode `all`: an answer to a poll, which carries the plan until it is answered; `changed`: down a socket, again each second
 */
export function commands(
	state: WinderState,
	config: WinderConfig,
	now: number,
	mode: 'changed' | 'all'
): { state: WinderState; lines: HostLine[] } {
	const boot = state.boots[0];
	if (!boot) return { state, lines: [] };
	const lines: HostLine[] = [];
	let next = state;

	const plan = planFor(state, config);
	if (plan) {
		const content = JSON.stringify(plan);
		let set = state.set;
		if (!set || set.content !== content || set.b !== boot.b) {
			set = { id: (state.commandId % 0xffff_fffe) + 1, content, b: boot.b, answered: false, sentAt: 0 };
			next = { ...next, commandId: set.id };
		}
		if (!set.answered && (mode === 'all' || now - set.sentAt >= setAgainMs)) {
			lines.push({ verb: 'SET', id: set.id, ...plan });
			set = { ...set, sentAt: now };
		}
		if (set !== state.set) next = { ...next, set };
	}

	if (hasEventGap(boot)) {
		const again = boot.syncFor === boot.e;
		const due = !again || (boot.syncCount < syncMax && now - boot.syncAt >= syncAgainMs * 2 ** (boot.syncCount - 1));
		if (due) {
			lines.push({ verb: 'SYNC', b: boot.b, e: boot.e });
			const asked = { ...boot, syncFor: boot.e, syncCount: again ? boot.syncCount + 1 : 1, syncAt: now };
			next = { ...next, boots: [asked, ...next.boots.slice(1)] };
		}
	}
	const waits = state.run?.pending && !state.run.pending.after && state.run.pending.b === boot.b;
	if (waits && now - state.askedAt >= askAgainMs) {
		lines.push({ verb: '?' });
		next = { ...next, askedAt: now };
	}
	return { state: next, lines };
}

/** The plan of the run in absolute turns of the current boot. */
function planFor(state: WinderState, config: WinderConfig): Omit<SetPlan, 'verb' | 'id'> | null {
	const boot = state.boots[0]!;
	const run = state.run?.status === 'open' ? state.run : state.upNext;
	if (!run || run.takingOff || run.snapOpen || run.pending || boot.held) return null;
	const sign = signOf(run.plan, config);
	const zero = net(boot) - sign * onBobbinOf(run, turnsOf(run, state.boots));
	return {
		b: boot.b,
		tgt: zero + sign * run.plan.target,
		look: run.plan.lookEvery,
		ease: config.easeEarlyTurns,
		stop: config.stopEarlyTurns,
		from: zero,
		fst: run.firstLook
	};
}

/** What may be acknowledged once it is on disk: the greatest line number, and the events without a gap. */
export function ackOf(state: WinderState, b?: string): { b: string; n: number; e: number } | null {
	const boot = b === undefined ? state.boots[0] : state.boots.find((known) => known.b === b);
	return boot ? { b: boot.b, n: boot.n, e: boot.e } : null;
}
