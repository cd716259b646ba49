import {
	formatLine,
	httpLinesMax,
	linksPerWinderMax,
	parseDeviceLine,
	parseJsonLine,
	refusalText,
	type DeviceLine
} from '../../turnline/index.ts';
import { linkStateOf } from '../../winding/link.ts';
import type { Fact, LiveView, Tap } from '../../winding/types.ts';
import {
	ackOf,
	askWhichWinder,
	changePlan,
	commands,
	dropWaiting,
	figuresOf,
	idleTurns,
	mergeCursor,
	newWinder,
	passTime,
	runIdsOf,
	takeCoil,
	takeLine,
	takeTap,
	viewOf,
	wantsCoil,
	type WinderState
} from '../../winding/winder.ts';
import { headOfQueue, takeNextCoil, type TakenCoil } from '../db/coils.ts';
import { inWorkshop } from '../db/connect.ts';
import { canonicalId } from '../db/ids.ts';
import {
	findTap,
	planOfOpenRun,
	readWinder,
	sweepLines,
	writeBatch,
	type Cursor,
	type LineRow,
	type RunChange,
	type WinderWrite
} from '../db/recorder.ts';
import type { Db } from '../db/schema.ts';
import { findWinder } from '../db/winders.ts';
import type { LiveHub } from '../live/hub.ts';
import { GroupCommit, unsavedRowsMax, type Addition, type Dropped } from './group-commit.ts';
import { runOf, Seat, traceOf, type SeatLink, type Shop } from './seat.ts';
import type { Carrier, Ingest, LinkLog, Received, RejectedLine, TapAnswer, WinderRef } from './types.ts';

/** A sender and a maker wait no longer than this for the disk before they are told that it does not save. */
const saveWaitMsMax = 4_000;
const notSavedRetryS = 2;
/** How often time is told to the fold. */
const tickMs = 250;
/** Seats are told in so many slices of it, so that many of them do not hold up lines. */
const tickSlices = 10;
/** A winder nobody sends to, taps or watches leaves the memory after this. */
const idleMsMax = 10 * 60_000;
/** A winder that is winding comes again this soon over HTTP, else within a second. */
const pollMsWinding = 200;
const pollMsStanding = 1_000;
/** Raw lines stay so long after they came; a closed run has its trace. */
const linesKeptDays = 7;
const sweepMs = 10 * 60_000;
/** After a failed look at the queue the next comes no sooner. */
const giveAgainMs = 2_000;
/** Lines are counted whether or not the queue can be read; they wait for it no longer than this. */
const giveWaitMsMax = 1_000;
/** So many turns without a coil are no bump against the bobbin. */
const whichWinderTurns = 5;
/** Late lines of a closed run are drawn into its trace no more often than this. */
const traceAgainMs = 2_000;
/** Of what one read brought, so many are noted: noise comes by the hundred. */
const droppedNotedMax = 20;
/** Taps older than this many facts are not looked for: more than a day at a bench. */
const tapFactsBack = 5_000;

export interface IngestOptions {
	db: Db;
	live: LiveHub;
	/** The wall clock, Unix ms. */
	now?: () => number;
	/** Milliseconds of a clock that nobody sets, for what is done every so often. */
	steady?: () => number;
	/** In place of the database, for what a failing one does. */
	write?: (writes: WinderWrite[]) => Promise<void>;
	saveWaitMsMax?: number;
	/** Told when the settings or the key of a winder changed. */
	onConfigChanged?: (winderId: string) => void;
	/** Told of what cannot be shown to anybody. */
	onError?: (what: string, error: unknown) => void;
}

/** What lines brought, before it is on disk. */
export interface TakenIn {
	stored: number;
	thinned: number;
	duplicate: number;
	rejected: RejectedLine[];
	/** May be told to the winder once `committed`. */
	ack: { b: string; n: number; e: number } | null;
	/** The same of each boot these lines were of: a spool may bring those of an earlier one. */
	acks: { b: string; n: number; e: number }[];
	commands: string[];
	retryMs: number;
	/** null: it is on disk. */
	committed: Promise<void> | null;
}

export type TakeIn = { ok: true; taken: TakenIn } | Exclude<Received, { ok: true }>;

/** The only one who knows both the database and the live hub: folds lines, taps and time, shows it, has it written. */
export class IngestCore implements Ingest {
	readonly #db: Db;
	readonly #live: LiveHub;
	readonly #now: () => number;
	readonly #steady: () => number;
	readonly #saveWaitMsMax: number;
	readonly #onConfigChanged: (winderId: string) => void;
	readonly #onError: (what: string, error: unknown) => void;
	readonly #commit: GroupCommit;
	readonly #seats = new Map<string, Seat>();
	readonly #loading = new Map<string, Promise<Seat | null>>();
	readonly #shops = new Map<string, Shop>();
	#timer: NodeJS.Timeout | null = null;
	/** Stopped: nothing more is taken in, for nobody would write it. */
	#stopped = false;
	#slice = 0;
	#sweptAt: number;

	constructor(options: IngestOptions) {
		this.#db = options.db;
		this.#live = options.live;
		this.#now = options.now ?? Date.now;
		this.#steady = options.steady ?? (() => performance.now());
		this.#saveWaitMsMax = options.saveWaitMsMax ?? saveWaitMsMax;
		this.#onConfigChanged = options.onConfigChanged ?? (() => {});
		this.#onError = options.onError ?? ((what, error) => console.error(what, error));
		this.#sweptAt = this.#steady();
		this.#commit = new GroupCommit({
			write: options.write ?? ((writes) => writeBatch(this.#db, writes)),
			onSaved: (workshopId, winderId) => this.#saved(workshopId, winderId),
			onFailed: (workshopId, winderId, error) => this.#failed(workshopId, winderId, error),
			onDropped: (workshopId, winderId, dropped, error) => this.#dropped(winderId, dropped, error)
		});
		this.#live.onWatched((workshopId, winderId) => {
			const seat = this.#seats.get(keyOf(workshopId, winderId));
			if (!seat) return;
			this.#show(seat);
			void this.#give(seat.shop);
		});
	}

	/** Starts the clock. */
	start(): void {
		this.#timer ??= setInterval(() => this.#tickSlice(), tickMs / tickSlices);
		this.#timer.unref();
	}

	/**
	 * Writes what is left, once. Nothing is taken in afterwards by anybody who waits for this. The answer is what could not
	 * be written, null for nothing.
	 */
	async stop(): Promise<{ lines: number } | null> {
		this.#stopped = true;
		if (this.#timer) clearInterval(this.#timer);
		this.#timer = null;
		for (const seat of this.#seats.values()) {
			if (seat.state !== seat.written) this.#write(seat, { snapshot: this.#snapshot(seat) });
		}
		await this.#commit.flush();
		this.#commit.stop();
		return this.#commit.unsaved();
	}

	/** Writes what waits without waiting for its time. */
	flush(): Promise<boolean> {
		return this.#commit.flush();
	}

	// ---- lines

	async receive(link: WinderRef, lines: string[], carrier: Carrier, receivedAtMs: number): Promise<Received> {
		const step = await this.takeIn(link, lines, carrier, receivedAtMs);
		if (!step.ok) return step;
		const { committed, acks: _acks, ...taken } = step.taken;
		if (committed && !(await this.#inTime(committed))) {
			return { ok: false, why: 'not-saved', retryAfterS: notSavedRetryS };
		}
		return { ok: true, ...taken };
	}

	/** The half of `receive` that needs no disk: what the lines say is counted and shown when this resolves. */
	async takeIn(link: WinderRef, lines: string[], carrier: Carrier, receivedAtMs: number): Promise<TakeIn> {
		const seat = await this.#seat(link.workshopId, link.winderId);
		if (!seat) return { ok: false, why: 'not-found' };
		if (this.#stopped) return { ok: false, why: 'not-saved', retryAfterS: notSavedRetryS };
		if (lines.length > httpLinesMax) return { ok: false, why: 'too-many-lines' };

		const parse = carrier === 'ndjson' ? parseJsonLine : parseDeviceLine;
		const good: { line: DeviceLine; text: string }[] = [];
		const rejected: RejectedLine[] = [];
		let spoken = 0;
		for (const [i, text] of lines.entries()) {
			const parsed = parse(text);
			if (!parsed.ok) {
				rejected.push({ line: i + 1, why: parsed.why, text: refusalText(parsed.why, parsed.key) });
				spoken += 1;
			} else if (parsed.line) {
				good.push({ line: parsed.line, text });
				spoken += 1;
			}
		}
		const waitMs = seat.bucket.take(spoken, this.#steady());
		if (waitMs > 0) return { ok: false, why: 'rate', retryAfterS: Math.ceil(waitMs / 1000) };
		// Nothing more is held than could be told apart from a leak; the winder keeps its lines.
		if (this.#commit.unsavedRows(seat.shop.id, seat.id) > unsavedRowsMax) {
			return { ok: false, why: 'not-saved', retryAfterS: notSavedRetryS };
		}
		seat.usedAt = this.#steady();
		for (const { line, why } of rejected) seat.record.line(receivedAtMs, lines[line - 1] ?? '', why, carrier);
		if (good.length === 0 && rejected.length > 0) {
			this.#show(seat);
			return { ok: false, why: 'nothing-parsed', rejected };
		}

		// A winder that is heard takes its coil before its first turn is counted.
		if (good.length > 0 && wantsCoil(seat.state) && seat.shop.waiting > 0) {
			const given = this.#give(seat.shop, seat);
			await Promise.race([given, new Promise((resolve) => setTimeout(resolve, giveWaitMsMax).unref())]);
		}

		const counts = this.#fold(seat, good, carrier, receivedAtMs);
		return {
			ok: true,
			taken: {
				...counts,
				rejected,
				ack: ackOf(seat.state),
				acks: acksOf(seat.state, good),
				// Down a socket and a cable they go by themselves.
				commands: carrier === 'ws' || carrier === 'serial' ? [] : this.#commandsFor(seat, 'all'),
				retryMs: this.#pollMs(seat),
				committed: this.#commit.pending(seat.shop.id, seat.id)
			}
		};
	}

	/** Lines that could not even be read as text, for the winder's page: counted, and gone. */
	async noteDropped(ref: WinderRef, why: 'too-long' | 'not-ascii', lines: number, at: number): Promise<void> {
		const seat = await this.#seat(ref.workshopId, ref.winderId);
		if (!seat) return;
		for (let i = 0; i < Math.min(lines, droppedNotedMax); i += 1) seat.record.line(at, '', why, 'serial');
		this.#show(seat);
	}

	#fold(
		seat: Seat,
		good: { line: DeviceLine; text: string }[],
		carrier: Carrier,
		receivedAtMs: number
	): Pick<TakenIn, 'stored' | 'thinned' | 'duplicate'> {
		const counts = { stored: 0, thinned: 0, duplicate: 0 };
		const rows: LineRow[] = [];
		const heard = new Set<string>();
		let whole = false;
		for (const { line, text } of good) {
			const step = takeLine(seat.state, seat.config, line, receivedAtMs);
			counts[step.outcome] += 1;
			seat.record.line(receivedAtMs, text, step.outcome, carrier);
			if (step.keep) {
				const row = { ...step.keep, receivedAt: receivedAtMs };
				rows.push(row);
				lateForTrace(seat, row);
			}
			if (step.outcome !== 'duplicate' && line.b !== undefined) heard.add(line.b);
			if (step.outcome !== 'duplicate' && line.verb !== 'T') whole = true;
			this.#apply(seat, step.state, step.facts, null);
		}
		if (heard.size > 0 || rows.length > 0) {
			const cursors = cursorsOf(seat.state, heard);
			const snapshot = whole || this.#snapshotDue(seat) ? this.#snapshot(seat) : null;
			this.#write(seat, { lines: rows, cursors, snapshot });
		}
		if (good.length > 0) {
			if (idleTurns(seat.state) >= 1) seat.leaves = false;
			this.#askWhichWinder(seat);
			this.#tellLinks(seat);
			this.#show(seat);
		}
		return counts;
	}

	#pollMs(seat: Seat): number {
		const boot = seat.state.boots[0];
		return boot?.turning || seat.state.run?.pending ? pollMsWinding : pollMsStanding;
	}

	// ---- taps

	async tap(workshopId: string, winderId: string, tap: Tap, ageMs: number): Promise<TapAnswer> {
		const seat = await this.#seat(workshopId, winderId);
		if (!seat) return { ok: false, why: 'not-found' };
		if (this.#stopped) return { ok: false, why: 'not-saved', retryAfterS: notSavedRetryS };
		const now = this.#now();
		seat.usedAt = this.#steady();
		// Only a tap that is older than this seat can be known to the record alone.
		if (!seat.taps.has(tap.id) && ageMs >= this.#steady() - seat.seatedAt) {
			const before = await this.#tapBefore(seat, tap.id);
			if (before === 'unknown') return { ok: false, why: 'not-saved', retryAfterS: notSavedRetryS };
			if (before) return { ok: true, pending: before.kind === 'tap-waiting', live: this.#show(seat) };
		}
		const from = movedFrom(seat.state, tap);
		const known = seat.taps.get(tap.id);
		const step = known
			? { state: seat.state, facts: [], answer: known }
			: takeTap(seat.state, seat.config, tap, now - ageMs, now);
		if (step.answer.ok && step.state !== seat.state) {
			seat.rememberTap(tap.id, step.answer);
			this.#apply(seat, step.state, step.facts, tap.id);
			if (from) await this.#moveRun(seat, from);
			this.#write(seat, { snapshot: this.#snapshot(seat) }, true);
			this.#tellLinks(seat);
		}
		this.#show(seat);
		// A tap that was made before may still wait for the disk.
		const committed = this.#commit.pending(workshopId, seat.id);
		const late = committed !== null && !(await this.#inTime(committed));
		if (late || this.#commit.holdsBack(workshopId, seat.id)) {
			return { ok: false, why: 'not-saved', retryAfterS: notSavedRetryS };
		}
		return { ...step.answer, live: this.#show(seat) };
	}

	/** Looks for a tap the state no longer remembers. Only one that may have been made long ago can be. */
	async #tapBefore(seat: Seat, tapId: string): Promise<{ kind: string } | null | 'unknown'> {
		if (seat.factNo === 0) return null;
		try {
			return await inWorkshop(this.#db, seat.shop.id, (trx) =>
				findTap(trx, seat.shop.id, seat.id, tapId, seat.factNo - tapFactsBack)
			);
		} catch (error) {
			this.#onError('A tap could not be looked for.', error);
			return 'unknown';
		}
	}

	async #moveRun(
		seat: Seat,
		from: { runId: string; otherWinderId: string; coil: Omit<TakenCoil, 'runId'> }
	): Promise<void> {
		const other = await this.#seat(seat.shop.id, from.otherWinderId);
		if (!other || !wantsCoil(other.state)) {
			// It has another coil by now: this one waits in the queue.
			this.#write(seat, { changes: [{ kind: 'put-back', runId: from.runId, coilId: from.coil.plan.coilId }] });
			return;
		}
		this.#write(seat, {
			changes: [{ kind: 'moved', runId: from.runId, coilId: from.coil.plan.coilId, winderId: other.id }]
		});
		const step = takeCoil(other.state, other.config, { runId: from.runId, ...from.coil }, this.#now());
		this.#apply(other, step.state, step.facts, null);
		this.#write(other, { snapshot: this.#snapshot(other) }, true);
		this.#tellLinks(other);
		this.#show(other);
	}

	// ---- reading

	async view(workshopId: string, winderId: string): Promise<LiveView | null> {
		const seat = await this.#seat(workshopId, winderId);
		if (!seat) return null;
		seat.usedAt = this.#steady();
		return this.#show(seat);
	}

	linkLog(workshopId: string, winderId: string): LinkLog {
		const seat = this.#seats.get(keyOf(workshopId, winderId));
		return seat ? seat.record.log(seat.links.size) : { lines: [], refused: {}, carriers: {}, links: 0 };
	}

	// ---- the queue

	async queueChanged(workshopId: string): Promise<void> {
		// A bench on its way into memory has read the queue as it was before.
		const coming = [...this.#loading].filter(([key]) => key.startsWith(`${workshopId}/`));
		await Promise.allSettled(coming.map(([, seat]) => seat));
		const shop = this.#shops.get(workshopId);
		// No bench is in memory: the next one reads the queue as it comes.
		if (!shop) return;
		shop.giveAt = 0;
		for (const seat of this.#seats.values()) if (seat.shop === shop) seat.leaves = false;
		await this.#give(shop, null, true);
	}

	async putBack(workshopId: string, winderId: string): Promise<'ok' | 'turned' | 'no-run' | 'not-found'> {
		const seat = await this.#seat(workshopId, winderId);
		if (!seat) return 'not-found';
		if (wantsCoil(seat.state)) return 'no-run';
		const dropped = dropWaiting(seat.state);
		if (!dropped) return 'turned';
		seat.state = dropped.state;
		const committed = this.#write(
			seat,
			{
				changes: [{ kind: 'put-back', runId: dropped.runId, coilId: dropped.coilId }],
				snapshot: this.#snapshot(seat)
			},
			true
		);
		seat.leaves = true;
		this.#show(seat);
		await this.#inTime(committed);
		return 'ok';
	}

	async planChanged(workshopId: string, coilId: string): Promise<void> {
		const found = await inWorkshop(this.#db, workshopId, (trx) => planOfOpenRun(trx, workshopId, coilId));
		if (!found) return;
		const seat = await this.#seat(workshopId, found.winderId);
		const step = seat && changePlan(seat.state, seat.config, found.plan, this.#now());
		if (!step) return;
		this.#apply(seat, step.state, step.facts, null);
		const committed = this.#write(seat, { snapshot: this.#snapshot(seat) }, true);
		this.#tellLinks(seat);
		this.#show(seat);
		await this.#inTime(committed);
	}

	async configChanged(workshopId: string, winderId: string): Promise<void> {
		this.#onConfigChanged(canonicalId(winderId));
		const key = keyOf(workshopId, winderId);
		await this.#loading.get(key);
		const seat = this.#seats.get(key);
		if (!seat) return;
		const winder = await inWorkshop(this.#db, workshopId, (trx) => findWinder(trx, workshopId, winderId));
		const sameKey = winder?.hasLinkKey && winder.linkKeyMadeAt?.getTime() === seat.winder.linkKeyMadeAt?.getTime();
		if (!sameKey) {
			for (const link of [...seat.links]) {
				if (link.byKey || !winder) link.close(1008, 'link key no longer valid');
			}
		}
		if (!winder) {
			this.#seats.delete(key);
			this.#live.forget(workshopId, winderId);
			return;
		}
		seat.winder = winder;
		this.#tellLinks(seat);
		this.#show(seat);
	}

	/** Gives coils to idle benches of a workshop; one pass at a time. `heard`: a bench whose winder speaks right now. */
	#give(shop: Shop, heard: Seat | null = null, look = false): Promise<void> {
		if (this.#stopped) return Promise.resolve();
		if (shop.giving) {
			shop.again ||= look;
			return shop.giving;
		}
		const idle = shop.waiting === 0 && shop.unsure.size === 0;
		if (!look && (idle || shop.giveAt > this.#steady())) return Promise.resolve();
		shop.giving = this.#giveAll(shop, heard, look).finally(() => {
			shop.giving = null;
			if (shop.again) {
				shop.again = false;
				void this.#give(shop, null, true);
			}
		});
		return shop.giving;
	}

	async #giveAll(shop: Shop, heard: Seat | null, look: boolean): Promise<void> {
		const before = { next: shop.next, waiting: shop.waiting };
		try {
			for (const seat of [...shop.unsure]) await this.#adopt(seat);
			if (look) await this.#readQueue(shop);
			const passed = new Set<Seat>();
			while (shop.waiting > 0) {
				const seat = this.#benchesInTurn(shop, heard).find((idle) => !passed.has(idle));
				if (!seat) break;
				passed.add(seat);
				shop.unsure.add(seat);
				const taken = await inWorkshop(this.#db, shop.id, (trx) =>
					takeNextCoil(trx, shop.id, seat.id, new Date(this.#now()), this.#reserved(seat))
				);
				shop.unsure.delete(seat);
				if (taken) this.#putOnBench(seat, taken);
				await this.#readQueue(shop);
			}
			shop.giveAt = 0;
		} catch (error) {
			shop.giveAt = this.#steady() + giveAgainMs;
			this.#onError('The queue could not be read.', error);
		}
		// With every look at a queue that stays as it is, all benches would be shown anew four times a second.
		if (shop.next === before.next && shop.waiting === before.waiting) return;
		for (const seat of this.#seats.values()) if (seat.shop === shop) this.#show(seat);
	}

	/** Idle benches, in the order in which they are given coils: those somebody looks at, then those that are heard. */
	#benchesInTurn(shop: Shop, heard: Seat | null): Seat[] {
		const now = this.#now();
		const ranked: [number, Seat][] = [];
		for (const seat of this.#seats.values()) {
			// What ended must be on disk first: a coil set aside comes back to the head of the queue with it.
			if (seat.shop !== shop || seat.leaves || !wantsCoil(seat.state)) continue;
			if (this.#commit.pendingChanges(shop.id, seat.id)) continue;
			const boot = seat.state.boots[0];
			const live = seat === heard || (boot && linkStateOf(now - boot.lastAt, boot.turning) === 'live');
			const watched = this.#live.watchers(shop.id, seat.id) > 0;
			if (!watched && !live) continue;
			ranked.push([(watched ? 2 : 0) + (live ? 1 : 0), seat]);
		}
		return ranked.sort((a, b) => b[0] - a[0]).map(([, seat]) => seat);
	}

	/** Coils set aside at other benches that can still be undone there: taken meanwhile, they would lie at two benches. */
	#reserved(seat: Seat): string[] {
		const now = this.#now();
		return [...this.#seats.values()].flatMap((other) => {
			const { run } = other.state;
			if (other === seat || other.shop !== seat.shop || run?.status !== 'set-aside') return [];
			return run.undoUntil !== null && now <= run.undoUntil ? [run.plan.coilId] : [];
		});
	}

	#putOnBench(seat: Seat, taken: TakenCoil): void {
		// The one before may have been undone, or this one set aside at another bench, while the queue was asked.
		if (!wantsCoil(seat.state) || this.#reserved(seat).includes(taken.plan.coilId)) {
			this.#write(seat, { changes: [{ kind: 'put-back', runId: taken.runId, coilId: taken.plan.coilId }] }, true);
			return;
		}
		const step = takeCoil(seat.state, seat.config, taken, this.#now());
		this.#apply(seat, step.state, step.facts, null);
		this.#write(seat, { snapshot: this.#snapshot(seat) }, true);
		this.#tellLinks(seat);
		this.#show(seat);
	}

	/** Takes over runs that the rows give to a bench and its state does not know: their taking broke off half-way. */
	async #adopt(seat: Seat): Promise<void> {
		const saved = await inWorkshop(this.#db, seat.shop.id, (trx) => readWinder(trx, seat.shop.id, seat.id));
		seat.shop.unsure.delete(seat);
		// What this bench has closed or given back stands open in the rows until its commit.
		if (this.#commit.pendingChanges(seat.shop.id, seat.id)) return void seat.shop.unsure.add(seat);
		const held = runIdsOf(seat.state);
		for (const run of saved.openRuns) if (!held.includes(run.runId)) this.#putOnBench(seat, run);
	}

	async #readQueue(shop: Shop): Promise<void> {
		const head = await inWorkshop(this.#db, shop.id, (trx) => headOfQueue(trx, shop.id));
		shop.next = head.next;
		shop.waiting = head.waiting;
	}

	/** A winder without a coil turns: if exactly one other bench holds a coil that waits untouched, it is asked whose it is. */
	#askWhichWinder(seat: Seat): void {
		const turns = idleTurns(seat.state);
		if (turns < whichWinderTurns) {
			seat.askedAtTurns = 0;
			return;
		}
		if (seat.askedAtTurns > 0 || seat.shop.waiting > 0) return;
		const others = [...this.#seats.values()].filter((other) => {
			if (other === seat || other.shop !== seat.shop) return false;
			const { run } = other.state;
			return run?.status === 'open' && run.startedAt === null && run.question === null;
		});
		const other = others.length === 1 ? others[0] : undefined;
		if (!other) return;
		const asker = { winderId: seat.id, name: seat.winder.name, turns };
		const step = askWhichWinder(other.state, other.config, asker, this.#now());
		if (!step) return;
		seat.askedAtTurns = turns;
		this.#apply(other, step.state, step.facts, null);
		this.#write(other, { snapshot: this.#snapshot(other) });
		this.#show(other);
	}

	// ---- links

	/** Joins a socket to its winder. `not-found`: no such winder; `full`: five hold already. */
	async attach(
		ref: WinderRef,
		link: SeatLink
	): Promise<{ ok: true; detach: () => void } | { ok: false; why: 'not-found' | 'full' }> {
		const seat = await this.#seat(ref.workshopId, ref.winderId);
		if (!seat) return { ok: false, why: 'not-found' };
		if (seat.links.size >= linksPerWinderMax) return { ok: false, why: 'full' };
		seat.links.add(link);
		return {
			ok: true,
			detach: () => {
				seat.links.delete(link);
			}
		};
	}

	#tellLinks(seat: Seat): void {
		if (seat.links.size === 0) return;
		const lines = this.#commandsFor(seat, 'changed');
		if (lines.length === 0) return;
		const send = () => {
			for (const link of seat.links) link.send(lines);
		};
		// The number of a command must not come again with another meaning after a crash: first the disk, then the wire.
		const committed = this.#commit.pending(seat.shop.id, seat.id);
		if (committed) void committed.then(send);
		else send();
	}

	#commandsFor(seat: Seat, mode: 'changed' | 'all'): string[] {
		const step = commands(seat.state, seat.config, this.#now(), mode);
		const numbered = step.state.commandId !== seat.state.commandId;
		seat.state = step.state;
		if (numbered) this.#write(seat, { snapshot: this.#snapshot(seat) });
		return step.lines.map(formatLine);
	}

	// ---- time

	/** Tells the fold the time; shows what time alone changes. */
	tick(): void {
		for (let slice = 0; slice < tickSlices; slice += 1) this.#tickSlice();
	}

	/** The seats of the next slice; with the last of them what is there once for all. */
	#tickSlice(): void {
		const now = this.#now();
		this.#slice = (this.#slice + 1) % tickSlices;
		for (const [i, seat] of [...this.#seats.values()].entries()) {
			if (i % tickSlices === this.#slice) this.#tickSeat(seat, now);
		}
		if (this.#slice !== 0) return;
		for (const shop of this.#shops.values()) void this.#give(shop);
		if (this.#steady() - this.#sweptAt >= sweepMs) {
			this.#sweptAt = this.#steady();
			void this.sweep();
		}
	}

	#tickSeat(seat: Seat, now: number): void {
		const step = passTime(seat.state, seat.config, now);
		if (step.state !== seat.state) {
			this.#apply(seat, step.state, step.facts, null);
			if (step.facts.length > 0) this.#write(seat, { snapshot: this.#snapshot(seat) }, true);
		}
		this.#tellLinks(seat);
		const { trace } = seat;
		if (trace?.due && this.#steady() - trace.writtenAt >= traceAgainMs) {
			trace.due = false;
			trace.writtenAt = this.#steady();
			this.#write(seat, { changes: [{ kind: 'trace', runId: trace.runId, trace: trace.stretches }] });
		}
		if (this.#snapshotDue(seat)) this.#write(seat, { snapshot: this.#snapshot(seat) });
		if (step.facts.length > 0 || this.#looksDifferent(seat, now)) this.#show(seat);
		const watched = this.#live.watchers(seat.shop.id, seat.id) > 0;
		const unsaved = this.#commit.pending(seat.shop.id, seat.id) !== null;
		if (this.#steady() - seat.usedAt > idleMsMax && !watched && !unsaved && seat.links.size === 0) this.#putAway(seat);
	}

	#looksDifferent(seat: Seat, now: number): boolean {
		const boot = seat.state.boots[0];
		const link = linkStateOf(boot ? Math.max(0, now - boot.lastAt) : null, boot?.turning ?? false);
		const saving = this.#commit.saving(seat.shop.id, seat.id);
		return link !== seat.shown.link || seat.state !== seat.shown.state || saving !== seat.shown.saving;
	}

	#putAway(seat: Seat): void {
		this.#seats.delete(`${seat.shop.id}/${seat.id}`);
		seat.shop.unsure.delete(seat);
		this.#live.forget(seat.shop.id, seat.id);
		const left = [...this.#seats.values()].some((other) => other.shop === seat.shop);
		if (!left) this.#shops.delete(seat.shop.id);
	}

	/** Removes raw lines a week old of the workshops in memory. */
	async sweep(): Promise<void> {
		const before = new Date(this.#now() - linesKeptDays * 86_400_000);
		for (const shop of [...this.#shops.values()]) {
			try {
				await inWorkshop(this.#db, shop.id, (trx) => sweepLines(trx, shop.id, before));
			} catch (error) {
				this.#onError('Old lines could not be swept.', error);
			}
		}
	}

	// ---- seats

	#seat(workshopId: string, winderId: string): Promise<Seat | null> | Seat {
		const key = keyOf(workshopId, winderId);
		const seat = this.#seats.get(key);
		if (seat) return seat;
		let loading = this.#loading.get(key);
		if (!loading) {
			loading = this.#load(workshopId, winderId).finally(() => this.#loading.delete(key));
			this.#loading.set(key, loading);
		}
		return loading;
	}

	async #load(workshopId: string, winderId: string): Promise<Seat | null> {
		const found = await inWorkshop(this.#db, workshopId, async (trx) => {
			const winder = await findWinder(trx, workshopId, winderId);
			if (!winder) return null;
			const saved = await readWinder(trx, workshopId, winder.id);
			return { winder, saved, head: await headOfQueue(trx, workshopId) };
		});
		if (!found) return null;
		const { winder, saved, head } = found;
		// A second seat of one winder would give out the numbers of the first one's facts again.
		const key = keyOf(workshopId, winder.id);
		const seated = this.#seats.get(key);
		if (seated) return seated;
		let state = (saved.state as WinderState | null) ?? newWinder();
		for (const cursor of saved.cursors) state = mergeCursor(state, cursor);
		let shop = this.#shops.get(workshopId);
		if (!shop) {
			// Only a new shop takes over the queue as it was read here: one that is there may have read it since.
			shop = { id: workshopId, ...head, giving: null, again: false, giveAt: 0, unsure: new Set() };
			this.#shops.set(workshopId, shop);
		}
		const seat = new Seat(winder, state, saved.factNo, shop, this.#steady());
		this.#seats.set(key, seat);
		// The server may have ended after a coil was taken and before this bench had it.
		const held = runIdsOf(state);
		for (const run of saved.openRuns) if (!held.includes(run.runId)) this.#putOnBench(seat, run);
		return seat;
	}

	/** Takes over a step of the fold: numbers its facts and notes what they change in the rows of runs. */
	#apply(seat: Seat, state: WinderState, facts: Fact[], tapId: string | null): void {
		const before = seat.state;
		seat.state = state;
		if (facts.length === 0) return;
		const changes = facts.flatMap((fact) => this.#changesOf(seat, fact, before));
		const numbered = facts.map((fact, i) => ({ ...fact, no: ++seat.factNo, tapId: i === 0 ? tapId : null }));
		this.#write(seat, { facts: numbered, changes, snapshot: this.#snapshot(seat) }, tapId !== null);
	}

	#changesOf(seat: Seat, fact: Fact, before: WinderState): RunChange[] {
		if (fact.runId === null) return [];
		// A step that ends a run may bring up the next one at once: then the run stands in the state before it.
		const now = runOf(seat.state, fact.runId);
		const run = now ?? runOf(before, fact.runId);
		if (!run) return [];
		const { runId } = run;
		const { coilId } = run.plan;
		switch (fact.kind) {
			case 'moved':
			case 'started':
			case 'started-here':
				return [{ kind: 'started', runId, at: fact.at }];
			case 'kept':
			case 'set-aside': {
				const figures = figuresOf(now ? seat.state : before, seat.config, runId);
				if (!figures) return [];
				if (!now && fact.turns !== null) figures.onBobbin = fact.turns;
				const trace = traceOf(now ? seat.state : before, seat.config, run);
				seat.trace = { runId, stretches: trace, due: false, writtenAt: this.#steady() };
				return [
					{
						kind: 'closed',
						runId,
						coilId,
						state: fact.kind,
						reason: fact.kind === 'set-aside' ? String(fact.detail.reason) : null,
						startedAt: run.startedAt,
						endedAt: fact.at,
						endedBy: fact.memberId,
						figures,
						trace
					}
				];
			}
			case 'undone': {
				// A tap that was only waiting was taken back: the rows never knew of it.
				if (fact.detail.was === undefined) return [];
				seat.trace = null;
				const changes: RunChange[] = [];
				// The coil set aside may be back on this bench already, as a run of its own.
				if (seat.state.upNext?.plan.coilId === coilId) {
					const dropped = dropWaiting(seat.state);
					if (dropped) {
						seat.state = dropped.state;
						changes.push({ kind: 'put-back', runId: dropped.runId, coilId });
					}
				}
				return [...changes, { kind: 'reopened', runId, coilId, winderId: seat.id }];
			}
			default:
				return [];
		}
	}

	#write(seat: Seat, more: Addition, soon = false): Promise<void> {
		return this.#commit.add(seat.shop.id, seat.id, more, soon);
	}

	#snapshot(seat: Seat): WinderWrite['snapshot'] {
		const at = this.#now();
		seat.written = seat.state;
		seat.writtenAt = this.#steady();
		return { state: seat.state, factNo: seat.factNo, at };
	}

	#snapshotDue(seat: Seat): boolean {
		return seat.state !== seat.written && this.#steady() - seat.writtenAt >= seat.snapshotMs;
	}

	#saved(workshopId: string, winderId: string): void {
		const seat = this.#seats.get(keyOf(workshopId, winderId));
		if (!seat) return;
		if (seat.shown.unsaved > 0 || !seat.shown.saving) this.#show(seat);
		if (wantsCoil(seat.state)) {
			// A coil set aside came back to the queue with this commit.
			const ended = seat.state.run !== null && seat.state.run.status === 'set-aside';
			void this.#give(seat.shop, null, ended);
		}
	}

	#failed(workshopId: string, winderId: string, error: unknown): void {
		this.#onError(`The lines of winder ${winderId} could not be saved; they are kept and tried again.`, error);
		const seat = this.#seats.get(keyOf(workshopId, winderId));
		if (seat) this.#show(seat);
	}

	#dropped(winderId: string, dropped: Dropped, error: unknown): void {
		const what =
			'snapshot' in dropped ? { factNo: dropped.snapshot.factNo, at: dropped.snapshot.at } : Object.values(dropped)[0];
		this.#onError(
			`GIVEN UP for winder ${winderId}: the database refuses this ${Object.keys(dropped)[0]} for good. ` +
				`Everything else of it is saved. ${JSON.stringify(what)}`,
			error
		);
	}

	#show(seat: Seat): LiveView {
		const now = this.#now();
		const view = viewOf(seat.state, seat.config, now);
		const unsaved = this.#commit.unsavedFacts(seat.shop.id, seat.id);
		const saving = this.#commit.saving(seat.shop.id, seat.id);
		const { upNext } = seat.state;
		seat.shown = { link: view.link, unsaved, saving, state: seat.state };
		return this.#live.publish(seat.shop.id, {
			...view,
			notices: seat.record.manyErrors(now) ? [...view.notices, 'line-errors'] : view.notices,
			winderId: seat.id,
			winderName: seat.winder.name,
			unsaved,
			saving,
			// While a kept coil can still be undone, the one after it lies ready on this bench already.
			next: upNext ? { name: upNext.plan.name, target: upNext.plan.target } : seat.shop.next,
			waiting: seat.shop.waiting + (upNext ? 1 : 0)
		});
	}

	/** Whether it was on disk within some seconds. */
	async #inTime(committed: Promise<void>): Promise<boolean> {
		let timer: NodeJS.Timeout | undefined;
		const late = new Promise<false>((resolve) => {
			timer = setTimeout(() => resolve(false), this.#saveWaitMsMax);
		});
		const saved = await Promise.race([committed.then(() => true as const), late]);
		clearTimeout(timer);
		return saved;
	}
}

/** The name of a seat, however the id was spelt that led to it. */
const keyOf = (workshopId: string, winderId: string) => `${workshopId}/${canonicalId(winderId)}`;

/** What may be acknowledged of each boot that has totals among these lines. */
function acksOf(state: WinderState, good: readonly { line: DeviceLine }[]): TakenIn['acks'] {
	const heard = good.flatMap(({ line }) =>
		line.verb === 'T' || line.verb === 'E' || line.verb === 'HI' ? [line.b] : []
	);
	return [...new Set(heard)].flatMap((b) => ackOf(state, b) ?? []);
}

/** Cursors of the boots lines were heard of. Totals held for the maker's word are not in them. */
function cursorsOf(state: WinderState, heard: Set<string>): Cursor[] {
	return state.boots
		.filter((boot) => heard.has(boot.b))
		.map(({ b, n, e, f, v, t, firstAt, lastAt }) => ({ b, n, e, f, v, t: Math.max(0, t), firstAt, lastAt }));
}

/** A line that comes after its run was closed still belongs into the trace. */
function lateForTrace(seat: Seat, row: LineRow): void {
	const { trace } = seat;
	if (!trace || trace.due) return;
	trace.due = trace.stretches.some(
		(stretch) => stretch.b === row.b && row.t <= stretch.endT && row.t >= stretch.startT
	);
}

/** What "it is wound on the other one" takes off this bench. */
function movedFrom(
	state: WinderState,
	tap: Tap
): { runId: string; otherWinderId: string; coil: Omit<TakenCoil, 'runId'> } | null {
	const run = state.run;
	if (tap.kind !== 'other-winder' || run?.questionDetail?.kind !== 'which-winder') return null;
	const { plan, sticker, runId } = run;
	return { runId, otherWinderId: run.questionDetail.otherWinderId, coil: { plan, sticker } };
}
