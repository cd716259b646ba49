import { axisAt } from '../../winding/boot.ts';
import type { RunCore } from '../../winding/run.ts';
import type { LinkState, WinderConfig } from '../../winding/types.ts';
import type { TapAnswer, WinderState } from '../../winding/winder.ts';
import type { TraceStretch } from '../db/recorder.ts';
import type { Winder } from '../db/winders.ts';
import { LinkRecord } from './link-record.ts';
import { LineBucket } from './rate.ts';

/** More taps than a bench sees in a day of small coils. */
const tapsMax = 512;

/** One open WebSocket or serial port of a winder, as the fold's keeper sees it. */
export interface SeatLink {
	send(lines: string[]): void;
	close(code: number, reason: string): void;
	/** Made with the link key (and ends with it), not with a person's ticket. */
	byKey: boolean;
}

/** What a workshop's benches share. */
export interface Shop {
	id: string;
	next: { name: string; target: number } | null;
	waiting: number;
	/** Benches are being given coils now; `again` when something changed meanwhile. */
	giving: Promise<void> | null;
	again: boolean;
	/** After a failure nothing is taken before this. */
	giveAt: number;
	/** Benches for which a coil may have been taken though the answer never came. */
	unsure: Set<Seat>;
}

/** One winder in memory: its state, and what is known of its link. */
export class Seat {
	winder: Winder;
	state: WinderState;
	/** Number of the last fact given out. */
	factNo: number;
	/** The state as it was last given to be written, and when. */
	written: WinderState | null;
	writtenAt = 0;
	/**
	 * The whole state is some kilobytes; between facts it is written no more often than this: at most a second, and
	 * another part of it for each winder, so that a hundred that began together do not all fall due at once.
	 */
	readonly snapshotMs = 750 + Math.random() * 250;
	usedAt: number;
	readonly seatedAt: number;
	/** Answers of the taps made since then, the newest last; bounded. */
	readonly taps = new Map<string, TapAnswer & { ok: true }>();
	readonly shop: Shop;
	readonly record = new LinkRecord();
	readonly bucket: LineBucket;
	readonly links = new Set<SeatLink>();
	/** What was last shown, to notice what time alone changes. */
	shown: { link: LinkState; unsaved: number; saving: boolean; state: WinderState | null } = {
		link: 'never',
		unsaved: 0,
		saving: true,
		state: null
	};
	/** The maker put a coil back from here: it is left to others until the queue changes or this spindle turns. */
	leaves = false;
	/** The trace of the run closed last; lines that come late still belong to it. */
	trace: { runId: string; stretches: TraceStretch[]; due: boolean; writtenAt: number } | null = null;
	/** Turns without a coil at which another bench was asked whether it is its coil; 0 before. */
	askedAtTurns = 0;

	constructor(winder: Winder, state: WinderState, factNo: number, shop: Shop, now: number) {
		this.winder = winder;
		this.state = state;
		this.written = state;
		this.factNo = factNo;
		this.shop = shop;
		this.usedAt = now;
		this.seatedAt = now;
		this.bucket = new LineBucket(now);
	}

	rememberTap(id: string, answer: TapAnswer & { ok: true }): void {
		this.taps.set(id, answer);
		if (this.taps.size > tapsMax) this.taps.delete(this.taps.keys().next().value as string);
	}

	get id(): string {
		return this.winder.id;
	}

	get config(): WinderConfig {
		return this.winder.config;
	}
}

/** The run, or the one up next, with this id. */
export function runOf(state: WinderState, runId: string): RunCore | null {
	return [state.run, state.upNext].find((run) => run?.runId === runId) ?? null;
}

/** Where the lines of a run lie, so that the recorder can write its trace. */
export function traceOf(state: WinderState, config: WinderConfig, run: RunCore): TraceStretch[] {
	const found: TraceStretch[] = [];
	if (run.startAxis === null) return found;
	let turns = run.adjust;
	for (const stretch of run.stretches) {
		const boot = state.boots.find((known) => known.b === stretch.b);
		const toF = stretch.toF ?? boot?.f ?? stretch.fromF;
		const toV = stretch.toV ?? boot?.v ?? stretch.fromV;
		const endAxis = run.endAxis ?? (boot ? axisAt(boot, boot.t, config.timeScale) : run.startAxis);
		// A state stored before stretches knew their boot's clock: the figures stand, the drawing lacks that part. A run must
		// never fail to be saved for its drawing.
		if (Number.isFinite(stretch.zeroAxis)) {
			found.push({
				b: stretch.b,
				sign: stretch.sign,
				fromSum: stretch.fromF + stretch.fromV,
				fromNet: stretch.fromF - stretch.fromV,
				toSum: toF + toV,
				fromTurns: turns,
				startT: Math.floor(run.startAxis - stretch.zeroAxis),
				endT: Math.ceil(endAxis - stretch.zeroAxis)
			});
		}
		turns += stretch.sign * (toF - toV - (stretch.fromF - stretch.fromV));
	}
	return found;
}
