import type { IncomingMessage } from 'node:http';
import type { Duplex } from 'node:stream';
import { connect } from './db/connect.ts';
import { databaseHealth } from './db/health.ts';
import type { Db } from './db/schema.ts';
import { env } from './env.ts';
import { IngestCore } from './ingest/ingest.ts';
import { LinkKeys } from './ingest/keys.ts';
import { createLinkServer } from './ingest/link-server.ts';
import type { Ingest } from './ingest/types.ts';
import { createLiveHub, type LiveHub } from './live/hub.ts';

/** What was not on disk when the program stopped. */
export interface Unsaved {
	/** Lines that would have been kept; totals and taps may be unsaved without any. */
	lines: number;
}

/** The running program: one a process, whichever copy of a module asks for it. */
export interface Turnstead {
	db: Db;
	ingest: Ingest;
	live: LiveHub;
	keys: LinkKeys;
	/** Takes over a WebSocket upgrade of the HTTP server. */
	upgrade(request: IncomingMessage, socket: Duplex, head: Buffer): void;
	/** Whether the database answers, as the right role, with the migrations this code needs. */
	health(): Promise<{ ok: true } | { ok: false; why: string }>;
	/**
	 * Links are told to come back, the last batch is written, streams end, the pool closes. The answer is what could not be
	 * written, null for nothing: it was never acknowledged, so that whoever sent it has it still.
	 */
	stop(): Promise<Unsaved | null>;
}

// The entry and the built program each load this module: what they share must not live in it.
const place = Symbol.for('turnstead');
const places = globalThis as unknown as Record<symbol, Turnstead | undefined>;

/** A screen that hears no beat for some seconds knows that the way to it is broken. */
const beatMs = 2_000;

/** Throws before `startTurnstead`. */
export function turnstead(): Turnstead {
	const app = places[place];
	if (!app) throw new Error('The program has not been started.');
	return app;
}

/** Starts the program, once; afterwards `turnstead()` finds it. */
export async function startTurnstead(): Promise<Turnstead> {
	return (places[place] ??= makeTurnstead(connect(env().databaseUrl, { role: 'turnstead_app' })));
}

/** The program on a database connected as turnstead_app. Nothing is asked of the database before the first request. */
export function makeTurnstead(db: Db): Turnstead {
	const live = createLiveHub();
	const keys = new LinkKeys(db);
	const ingest = new IngestCore({ db, live, onConfigChanged: (winderId) => keys.forget(winderId) });
	const links = createLinkServer(ingest, keys);
	const beat = setInterval(() => live.beat(), beatMs);
	beat.unref();
	ingest.start();

	let stopped: Promise<Unsaved | null> | null = null;
	const stop = async () => {
		await links.close();
		const unsaved = await ingest.stop();
		clearInterval(beat);
		live.close();
		await db.destroy();
		if (places[place] === app) delete places[place];
		return unsaved;
	};
	const app: Turnstead = {
		db,
		ingest,
		live,
		keys,
		upgrade: links.upgrade,
		health: () => databaseHealth(db),
		stop: () => (stopped ??= stop())
	};
	return app;
}
