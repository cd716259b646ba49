import type { Refusal } from '../../turnline/index.ts';
import type { LiveView, Tap, TapRefusal } from '../../winding/types.ts';

/** How lines came. */
export type Carrier = 'http' | 'ndjson' | 'ws' | 'serial';

export interface WinderRef {
	workshopId: string;
	winderId: string;
}

export interface RejectedLine {
	/** Which line of those sent, from 1. */
	line: number;
	why: Refusal;
	/** The same as a sentence. */
	text: string;
}

export type Received =
	| {
			ok: true;
			/** Greatest of the current boot that is on disk; null before any. */
			ack: { b: string; n: number; e: number } | null;
			stored: number;
			thinned: number;
			duplicate: number;
			rejected: RejectedLine[];
			/** Lines for the winder, with their checksums. */
			commands: string[];
			/** Come again after this long. */
			retryMs: number;
	  }
	| { ok: false; why: 'not-found' }
	| { ok: false; why: 'nothing-parsed'; rejected: RejectedLine[] }
	| { ok: false; why: 'too-many-lines' }
	/** Over the rate: none of the lines was taken in. */
	| { ok: false; why: 'rate'; retryAfterS: number }
	/** Counted and shown, but not on disk yet: send the lines again. */
	| { ok: false; why: 'not-saved'; retryAfterS: number };

export type TapAnswer =
	| { ok: true; pending: boolean; live: LiveView }
	| { ok: false; why: TapRefusal; live: LiveView }
	| { ok: false; why: 'not-found' }
	/** It holds in memory and is saved as soon as that is possible; asking again with the same id tells. */
	| { ok: false; why: 'not-saved'; retryAfterS: number };

export interface CarrierLog {
	/** Unix ms of the last line. */
	lastAt: number;
	lines: number;
}

/** What a winder's page shows of its link: bounded, in memory, since this server start. */
export interface LinkLog {
	/** The newest last. `verdict`: what became of the line. */
	lines: { at: number; text: string; verdict: 'stored' | 'thinned' | 'duplicate' | Refusal }[];
	/** How many lines were refused for each reason. */
	refused: Partial<Record<Refusal, number>>;
	carriers: Partial<Record<Carrier, CarrierLog>>;
	/** WebSockets and serial ports open now. */
	links: number;
}

export interface Ingest {
	/** Takes lines in. Answers once what they brought is on disk; shows them at once. */
	receive(link: WinderRef, lines: string[], carrier: Carrier, receivedAtMs: number): Promise<Received>;
	/** A tap made `ageMs` ago. The same id again answers as the first did. Answers once it is on disk. */
	tap(workshopId: string, winderId: string, tap: Tap, ageMs: number): Promise<TapAnswer>;
	/** null: unknown or another workshop's winder. */
	view(workshopId: string, winderId: string): Promise<LiveView | null>;
	/** Coils were added, moved or removed: idle benches take the next. */
	queueChanged(workshopId: string): Promise<void>;
	/** The coil on a bench goes back to the head of the queue, if it has not turned. */
	putBack(workshopId: string, winderId: string): Promise<'ok' | 'turned' | 'no-run' | 'not-found'>;
	/** A coil on a bench was edited. */
	planChanged(workshopId: string, coilId: string): Promise<void>;
	/** Settings, name or key of a winder changed, or it was removed. Closes links whose key no longer holds. */
	configChanged(workshopId: string, winderId: string): Promise<void>;
	linkLog(workshopId: string, winderId: string): LinkLog;
}
