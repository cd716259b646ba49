import type { Cursor, LineRow, NumberedFact, RunChange, WinderWrite } from '../db/recorder.ts';

/** A batch waits this long for more to come along: half of what a person could notice, and a commit saved for each line. */
const gatherMsMax = 40;
/** A batch of so many lines goes at once. */
const gatherLinesMax = 200;
/** After a failed commit the next try comes after this, doubled each time up to the second figure. */
const retryMsMin = 250;
const retryMsMax = 5_000;
/**
 * So often a winder's rows may be refused before they are written one by one without those that are refused: some eight
 * seconds, in which whatever was only passing has passed.
 */
export const refusalsMax = 5;
/** A write that takes longer than this is, for whoever looks at the bench, none. */
const slowMsMax = 3_000;
/**
 * Lines and facts one winder may hold in memory while nothing can be saved. Thinned lines come at about two a second, so
 * this is some three hours; past it the winder keeps its lines itself.
 */
export const unsavedRowsMax = 20_000;

/**
 * What a commit sets free (answers, acknowledgements, views) is let go for so long at a time: a hundred winders at once
 * would hold up the lines that come meanwhile by some ten milliseconds.
 */
const setFreeMsMax = 0.5;

/** What a step adds to what is to be written of one winder. */
export interface Addition {
	lines?: LineRow[];
	cursors?: Cursor[];
	facts?: NumberedFact[];
	changes?: RunChange[];
	snapshot?: WinderWrite['snapshot'];
}

/** Unwritten work of one winder. */
class Journal {
	readonly write: WinderWrite;
	failures = 0;
	/** It holds the end of a run that was refused, see holdsBack. */
	heldBack = false;
	retryAt = 0;
	/** When its writing began. */
	writingAt = Infinity;
	/** When it is due, on the clock that nobody sets: the first thing in it has waited long enough, or a person waits. */
	dueAt = Infinity;
	readonly committed: Promise<void>;
	resolve!: () => void;
	/** Journals that failed and went on in this one. */
	before: Journal[] = [];

	constructor(workshopId: string, winderId: string) {
		this.write = { workshopId, winderId, lines: [], cursors: [], facts: [], changes: [], snapshot: null };
		this.committed = new Promise((resolve) => (this.resolve = resolve));
	}

	add(more: Addition): void {
		if (more.lines) this.write.lines.push(...more.lines);
		if (more.facts) this.write.facts.push(...more.facts);
		if (more.changes) this.write.changes.push(...more.changes);
		if (more.snapshot) this.write.snapshot = more.snapshot;
		for (const cursor of more.cursors ?? []) {
			const at = this.write.cursors.findIndex((other) => other.b === cursor.b);
			if (at < 0) this.write.cursors.push(cursor);
			else this.write.cursors[at] = { ...cursor, firstAt: (this.write.cursors[at] as Cursor).firstAt };
		}
	}

	/** This one came first and failed; `later` goes on from it. */
	continueWith(later: Journal): void {
		this.add(later.write);
		this.before.push(later);
	}

	done(): void {
		for (const other of this.before) other.done();
		this.resolve();
	}

	get rows(): number {
		return this.write.lines.length + this.write.facts.length + this.write.changes.length;
	}
}

export interface GroupCommitOptions {
	write: (writes: WinderWrite[]) => Promise<void>;
	/** Told after each commit, and when the saving of a winder fails. */
	onSaved: (workshopId: string, winderId: string) => void;
	onFailed: (workshopId: string, winderId: string, error: unknown) => void;
	/** Told what was given up, in full, because the database refuses it for good. */
	onDropped: (workshopId: string, winderId: string, dropped: Dropped, error: unknown) => void;
}

/** What can be given up for the rest to be saved. Lines, cursors and the end of a run never are. */
export type Dropped =
	{ fact: NumberedFact } | { change: RunChange } | { snapshot: NonNullable<WinderWrite['snapshot']> };

/**
 * One writer for all winders: what comes while a batch is being written waits for the next. What could not be written
 * stays, in order, and is tried again.
 */
export class GroupCommit {
	readonly #options: GroupCommitOptions;
	#gathering = new Map<string, Journal>();
	#writing = new Map<string, Journal>();
	/** Refusals in a row of each winder's rows, until all of them are written. */
	readonly #refusals = new Map<string, number>();
	#flushing: Promise<void> | null = null;
	#timer: NodeJS.Timeout | null = null;
	#timerAt = Infinity;
	#lines = 0;

	constructor(options: GroupCommitOptions) {
		this.#options = options;
	}

	/** Gives work of one winder; resolves once it is on disk, however many tries that takes. `soon`: a person waits for it. */
	add(workshopId: string, winderId: string, more: Addition, soon = false): Promise<void> {
		const key = `${workshopId}/${winderId}`;
		let journal = this.#gathering.get(key);
		if (!journal) {
			journal = new Journal(workshopId, winderId);
			this.#gathering.set(key, journal);
		}
		journal.add(more);
		this.#lines += more.lines?.length ?? 0;
		const now = performance.now();
		journal.dueAt = Math.min(journal.dueAt, soon || this.#lines >= gatherLinesMax ? now : now + gatherMsMax);
		this.#schedule(Math.max(journal.dueAt, journal.retryAt));
		return journal.committed;
	}

	/** The commit that covers everything given so far of a winder; null: all of it is on disk. */
	pending(workshopId: string, winderId: string): Promise<void> | null {
		const key = `${workshopId}/${winderId}`;
		return (this.#gathering.get(key) ?? this.#writing.get(key))?.committed ?? null;
	}

	/** Rows of a winder not on disk yet. */
	unsavedRows(workshopId: string, winderId: string): number {
		const key = `${workshopId}/${winderId}`;
		return (this.#gathering.get(key)?.rows ?? 0) + (this.#writing.get(key)?.rows ?? 0);
	}

	/** Facts of a winder not on disk yet. */
	unsavedFacts(workshopId: string, winderId: string): number {
		const key = `${workshopId}/${winderId}`;
		const of = (journals: Map<string, Journal>) => journals.get(key)?.write.facts.length ?? 0;
		return of(this.#gathering) + of(this.#writing);
	}

	/** Whether rows of runs and coils wait to be written for a winder. */
	pendingChanges(workshopId: string, winderId: string): boolean {
		const key = `${workshopId}/${winderId}`;
		const some = (journals: Map<string, Journal>) => (journals.get(key)?.write.changes.length ?? 0) > 0;
		return some(this.#gathering) || some(this.#writing);
	}

	/** Whether the end of a run waits that the database refuses: what came after it is on disk, what a maker tapped is not. */
	holdsBack(workshopId: string, winderId: string): boolean {
		const key = `${workshopId}/${winderId}`;
		return this.#gathering.get(key)?.heldBack === true || this.#writing.get(key)?.heldBack === true;
	}

	/** What is not on disk now, of all winders; null: nothing. */
	unsaved(): { lines: number } | null {
		const journals = [...this.#gathering.values(), ...this.#writing.values()];
		if (journals.length === 0) return null;
		return { lines: journals.reduce((sum, journal) => sum + journal.write.lines.length, 0) };
	}

	/** false while the last try to save this winder failed, or the one going on takes very long. */
	saving(workshopId: string, winderId: string): boolean {
		const key = `${workshopId}/${winderId}`;
		const writing = this.#writing.get(key);
		if (writing && performance.now() - writing.writingAt > slowMsMax) return false;
		return (this.#gathering.get(key)?.failures ?? 0) === 0 && (writing?.failures ?? 0) === 0;
	}

	/** Writes what is there now, whatever its time. Resolves after one try; true when nothing is left. */
	async flush(): Promise<boolean> {
		await this.#flushing;
		await this.#run(true);
		return this.#gathering.size === 0;
	}

	/** No more timers; what is unsaved is lost with the memory, and was never acknowledged. */
	stop(): void {
		if (this.#timer) clearTimeout(this.#timer);
		this.#timer = null;
		this.#timerAt = Infinity;
	}

	#schedule(at: number): void {
		if (this.#flushing || at >= this.#timerAt) return;
		if (this.#timer) clearTimeout(this.#timer);
		this.#timerAt = at;
		this.#timer = setTimeout(
			() => {
				this.#timer = null;
				this.#timerAt = Infinity;
				void this.#run(false);
			},
			Math.max(0, at - performance.now())
		);
	}

	#run(all: boolean): Promise<void> {
		this.#flushing ??= this.#flush(all).finally(() => {
			this.#flushing = null;
			this.#scheduleNext();
		});
		return this.#flushing;
	}

	#scheduleNext(): void {
		for (const journal of this.#gathering.values()) this.#schedule(Math.max(journal.dueAt, journal.retryAt));
	}

	async #flush(all: boolean): Promise<void> {
		const now = performance.now();
		const batch: Journal[] = [];
		for (const [key, journal] of this.#gathering) {
			if (!all && journal.retryAt > now) continue;
			batch.push(journal);
			this.#gathering.delete(key);
			journal.writingAt = now;
			this.#writing.set(key, journal);
		}
		this.#lines = 0;
		if (batch.length === 0) return;
		const error = await this.#try(batch);
		if (error === null) return await this.#saved(batch);
		if (isAway(error)) return this.#failed(batch, error);
		// One winder's rows are refused: the others must not wait for it.
		for (const journal of batch) {
			const own = batch.length === 1 ? error : await this.#try([journal]);
			if (own === null) await this.#saved([journal]);
			else await this.#refused(journal, own);
		}
	}

	async #refused(journal: Journal, error: unknown): Promise<void> {
		if (!isRefusal(error)) return this.#failed([journal], error);
		const key = `${journal.write.workshopId}/${journal.write.winderId}`;
		const refusals = (this.#refusals.get(key) ?? 0) + 1;
		this.#refusals.set(key, refusals);
		if (refusals < refusalsMax) this.#failed([journal], error);
		else await this.#writeApart(journal);
	}

	/**
	 * Writes a winder's rows piece by piece, because one of them is refused for good and all others must not wait for it:
	 * lines and cursors first, then each fact and each change by itself, the state last. A fact, a change or a state that
	 * is refused is given up, loudly. The end of a run is not: it and what follows wait and are tried again for ever.
	 */
	async #writeApart(journal: Journal): Promise<void> {
		const { write } = journal;
		const { workshopId, winderId } = write;
		const nothing: WinderWrite = {
			workshopId,
			winderId,
			lines: [],
			cursors: [],
			facts: [],
			changes: [],
			snapshot: null
		};
		const part = (some: Partial<WinderWrite>) => this.#tryWrite([{ ...nothing, ...some }]);
		const dropped = (what: Dropped, error: unknown) => this.#options.onDropped(workshopId, winderId, what, error);

		const lost = await part({ lines: write.lines, cursors: write.cursors });
		if (lost !== null) return this.#failed([journal], lost);
		write.lines = [];
		write.cursors = [];
		for (let fact = write.facts[0]; fact; fact = write.facts[0]) {
			const error = await part({ facts: [fact] });
			if (error !== null && !isRefusal(error)) return this.#failed([journal], error);
			if (error !== null) dropped({ fact }, error);
			write.facts.shift();
		}
		for (let change = write.changes[0]; change; change = write.changes[0]) {
			const error = await part({ changes: [change] });
			if (error !== null && !isRefusal(error)) return this.#failed([journal], error);
			if (error !== null && change.kind === 'closed') return this.#holdBack(journal, error);
			if (error !== null) dropped({ change }, error);
			write.changes.shift();
		}
		const { snapshot } = write;
		const error = snapshot && (await part({ snapshot }));
		if (error !== null && !isRefusal(error)) return this.#failed([journal], error);
		if (snapshot && error !== null) dropped({ snapshot }, error);
		const refusals = this.#refusals.get(`${workshopId}/${winderId}`);
		await this.#saved([journal]);
		// What was refused now may come again with the next of this winder, and then waits no eight seconds.
		if (refusals !== undefined && error !== null) this.#refusals.set(`${workshopId}/${winderId}`, refusals);
	}

	/** Lines and facts are on disk and are let go; the end of a run and what follows it goes on in a journal of its own. */
	#holdBack(journal: Journal, error: unknown): void {
		const { workshopId, winderId, changes, snapshot } = journal.write;
		const rest = new Journal(workshopId, winderId);
		rest.add({ changes, snapshot });
		rest.heldBack = true;
		rest.dueAt = journal.dueAt;
		rest.failures = journal.failures;
		journal.done();
		this.#failed([rest], error);
	}

	async #try(batch: Journal[]): Promise<unknown> {
		return this.#tryWrite(batch.map((journal) => journal.write));
	}

	async #tryWrite(writes: WinderWrite[]): Promise<unknown> {
		try {
			await this.#options.write(writes);
			return null;
		} catch (error) {
			return error ?? new Error('The batch was refused.');
		}
	}

	async #saved(batch: Journal[]): Promise<void> {
		let from = performance.now();
		for (const journal of batch) {
			if (performance.now() - from > setFreeMsMax) {
				await new Promise((resolve) => setImmediate(resolve));
				from = performance.now();
			}
			const { workshopId, winderId } = journal.write;
			this.#writing.delete(`${workshopId}/${winderId}`);
			this.#refusals.delete(`${workshopId}/${winderId}`);
			journal.done();
			this.#options.onSaved(workshopId, winderId);
		}
	}

	#failed(batch: Journal[], error: unknown): void {
		const now = performance.now();
		for (const journal of batch) {
			const { workshopId, winderId } = journal.write;
			const key = `${workshopId}/${winderId}`;
			this.#writing.delete(key);
			const later = this.#gathering.get(key);
			if (later) journal.continueWith(later);
			this.#gathering.set(key, journal);
			journal.retryAt = now + Math.min(retryMsMax, retryMsMin * 2 ** journal.failures);
			journal.failures += 1;
			this.#options.onFailed(workshopId, winderId, error);
		}
	}
}

/** The data is refused as it is (SQLSTATE classes 22 and 23): the same again would be refused again. */
function isRefusal(error: unknown): boolean {
	const code = (error as { code?: unknown }).code;
	return typeof code === 'string' && /^2[23][0-9A-Z]{3}$/.test(code);
}

/** The database cannot be reached or takes nothing at all, in contrast to refusing these rows. */
function isAway(error: unknown): boolean {
	const code = (error as { code?: unknown }).code;
	// SQLSTATE classes 22 and 23: the data is refused; 42: a row's shape is. All else is about the server or the way to it.
	return typeof code !== 'string' || !/^(22|23|42)[0-9A-Z]{3}$/.test(code);
}
