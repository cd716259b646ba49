import type { Cursor, LineRow, NumberedFact, RunChange, WinderWrite } from '../db/recorder.ts';

/** A batch waits this long for more to come along: half of what a person could notice, and a commit saved for each line. */
const gatherMsMax = 40;
/** A batch of so many lines goes at once. */
const gatherLinesMax = 200;
/** After a failed commit the next try comes after this, doubled each time up to the second figure. */
const retryMsMin = 250;
const retryMsMax = 5_000;
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
}

/**
 * One writer for all winders: what comes while a batch is being written waits for the next. What could not be written
 * stays, in order, and is tried again.
 */
export class GroupCommit {
	readonly #options: GroupCommitOptions;
	#gathering = new Map<string, Journal>();
	#writing = new Map<string, Journal>();
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
		if (batch.length > 1 && !isAway(error)) {
			// One winder's rows are refused: the others must not wait for it.
			for (const journal of batch) {
				const own = await this.#try([journal]);
				if (own === null) await this.#saved([journal]);
				else this.#failed([journal], own);
			}
			return;
		}
		this.#failed(batch, error);
	}

	async #try(batch: Journal[]): Promise<unknown> {
		try {
			await this.#options.write(batch.map((journal) => journal.write));
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

/** The database cannot be reached or takes nothing at all, in contrast to refusing these rows. */
function isAway(error: unknown): boolean {
	const code = (error as { code?: unknown }).code;
	// SQLSTATE classes 22 and 23: the data is refused; 42: a row's shape is. All else is about the server or the way to it.
	return typeof code !== 'string' || !/^(22|23|42)[0-9A-Z]{3}$/.test(code);
}
