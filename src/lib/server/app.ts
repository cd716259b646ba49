import type { IncomingMessage } from 'node:http';
import type { Duplex } from 'node:stream';
import { connect } from './db/connect.ts';
import { databaseHealth } from './db/health.ts';
import type { Db } from './db/schema.ts';
import { env, type SerialWinder } from './env.ts';
import { IngestCore } from './ingest/ingest.ts';
import { LinkKeys } from './ingest/keys.ts';
import { createLinkServer } from './ingest/link-server.ts';
import type { SerialLinks, SerialPortNow } from './ingest/serial-links.ts';
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
	/** Reads serial ports of this machine itself; once. */
	readSerial(winders: readonly SerialWinder[]): Promise<void>;
	/** Those ports as they are now. */
	serialPorts(): SerialPortNow[];
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
	const there = places[place];
	if (there) return there;
	const { databaseUrl, serialWinders } = env();
	const app = (places[place] = makeTurnstead(connect(databaseUrl, { role: 'turnstead_app' })));
	await app.readSerial(serialWinders);
	return app;
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

	let serial: SerialLinks | null = null;

	let stopped: Promise<Unsaved | null> | null = null;
	const stop = async () => {
		await Promise.all([links.close(), serial?.close()]);
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
		async readSerial(winders) {
			if (winders.length === 0 || serial) return;
			// Loaded only where it is wanted: it brings a native module.
			const { openSerialLinks } = await import('./ingest/serial-links.ts');
			serial = openSerialLinks(ingest, keys, winders);
		},
		serialPorts: () => serial?.now() ?? [],
		health: () => databaseHealth(db),
		stop: () => (stopped ??= stop())
	};
	return app;
}
