import { randomUUID } from 'node:crypto';
import type { LiveView } from '../../winding/types.ts';
import { canonicalId } from '../db/ids.ts';

/** A view as its maker gives it; the hub stamps the rest. */
export type UnstampedView = Omit<LiveView, 'seq' | 'server'>;

/** What a watcher is handed next. `ended`: the server stops or the watcher left. */
export type Watched = { kind: 'live'; view: LiveView } | { kind: 'beat' } | { kind: 'ended' };

/** One reader of one winder. It pulls; what it has not pulled is replaced by what is newer. */
export interface Watcher {
	/** The newest view not yet handed out, at once or when it comes. One call at a time. */
	next(): Promise<Watched>;
	end(): void;
}

export interface LiveHub {
	/** Differs at each server start. */
	readonly server: string;
	/** Stamps a view and hands it to whoever watches that winder. */
	publish(workshopId: string, view: UnstampedView): LiveView;
	latest(workshopId: string, winderId: string): LiveView | null;
	/** No longer hold the last view of a winder that was put away. */
	forget(workshopId: string, winderId: string): void;
	/** Watches one winder, starting with its latest view. Ends with `signal`, or when the hub closes. */
	open(workshopId: string, winderId: string, signal?: AbortSignal): Watcher;
	/** The same as an async iterator of views. */
	watch(workshopId: string, winderId: string, signal?: AbortSignal): AsyncIterableIterator<LiveView>;
	/** Watchers of one winder now. */
	watchers(workshopId: string, winderId: string): number;
	/** Told when a winder gets its first watcher. */
	onWatched(hear: (workshopId: string, winderId: string) => void): void;
	/** Every watcher gets a beat unless one is still waiting for it; called every two seconds. */
	beat(): void;
	/** Ends every watcher, and every later one at once. */
	close(): void;
}

class OneSlot implements Watcher {
	// One slot and no queue: a screen on a bad network must not hold what it will never need.
	#slot: LiveView | null = null;
	#beatDue = false;
	#ended = false;
	#wake: ((watched: Watched) => void) | null = null;
	readonly #left: () => void;

	constructor(left: () => void) {
		this.#left = left;
	}

	put(view: LiveView): void {
		this.#slot = view;
		this.#hand();
	}

	beat(): void {
		this.#beatDue = true;
		this.#hand();
	}

	next(): Promise<Watched> {
		if (this.#wake) throw new Error('A watcher is asked one thing at a time.');
		const ready = this.#take();
		if (ready) return Promise.resolve(ready);
		return new Promise((resolve) => (this.#wake = resolve));
	}

	end(): void {
		if (this.#ended) return;
		this.#ended = true;
		this.#slot = null;
		this.#left();
		this.#hand();
	}

	#take(): Watched | null {
		if (this.#ended) return { kind: 'ended' };
		if (this.#slot) {
			const view = this.#slot;
			this.#slot = null;
			return { kind: 'live', view };
		}
		if (this.#beatDue) {
			this.#beatDue = false;
			return { kind: 'beat' };
		}
		return null;
	}

	#hand(): void {
		if (!this.#wake) return;
		const ready = this.#take();
		if (!ready) return;
		const wake = this.#wake;
		this.#wake = null;
		wake(ready);
	}
}

/** Who watches which winder, and the latest view of each. In memory; each view carries the whole state, newest wins. */
export function createLiveHub(): LiveHub {
	const server = randomUUID();
	let seq = 0;
	let closed = false;
	const latest = new Map<string, LiveView>();
	const watching = new Map<string, Set<OneSlot>>();
	const hearers: ((workshopId: string, winderId: string) => void)[] = [];
	const keyOf = (workshopId: string, winderId: string) => `${workshopId}/${canonicalId(winderId)}`;

	const open = (workshopId: string, winderId: string, signal?: AbortSignal): Watcher => {
		const key = keyOf(workshopId, winderId);
		const set = watching.get(key) ?? new Set();
		const onAbort = () => watcher.end();
		const watcher = new OneSlot(() => {
			signal?.removeEventListener('abort', onAbort);
			set.delete(watcher);
			if (set.size === 0 && watching.get(key) === set) watching.delete(key);
		});
		if (closed || signal?.aborted) {
			watcher.end();
			return watcher;
		}
		set.add(watcher);
		watching.set(key, set);
		signal?.addEventListener('abort', onAbort, { once: true });
		const view = latest.get(key);
		if (view) watcher.put(view);
		if (set.size === 1) for (const hear of hearers) hear(workshopId, canonicalId(winderId));
		return watcher;
	};

	return {
		server,
		publish(workshopId, view) {
			const key = keyOf(workshopId, view.winderId);
			const stamped: LiveView = { ...view, seq: ++seq, server };
			latest.set(key, stamped);
			for (const watcher of watching.get(key) ?? []) watcher.put(stamped);
			return stamped;
		},
		latest: (workshopId, winderId) => latest.get(keyOf(workshopId, winderId)) ?? null,
		forget: (workshopId, winderId) => void latest.delete(keyOf(workshopId, winderId)),
		open,
		async *watch(workshopId, winderId, signal) {
			const watcher = open(workshopId, winderId, signal);
			try {
				for (;;) {
					const watched = await watcher.next();
					if (watched.kind === 'ended') return;
					if (watched.kind === 'live') yield watched.view;
				}
			} finally {
				watcher.end();
			}
		},
		watchers: (workshopId, winderId) => watching.get(keyOf(workshopId, winderId))?.size ?? 0,
		onWatched: (hear) => void hearers.push(hear),
		beat() {
			for (const set of watching.values()) for (const watcher of set) watcher.beat();
		},
		close() {
			closed = true;
			for (const set of [...watching.values()]) for (const watcher of [...set]) watcher.end();
		}
	};
}
