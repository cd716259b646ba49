import { createHash, randomBytes } from 'node:crypto';
import { sql, type Kysely, type Selectable, type Transaction } from 'kysely';
import type { Direction, WinderConfig } from '../../winding/types.ts';
import { canonicalId, isUuid } from './ids.ts';
import type { Database, WinderTable } from './schema.ts';

/** A winder of a workshop and how it is set. */
export interface Winder {
	id: string;
	workshopId: string;
	name: string;
	config: WinderConfig;
	hasLinkKey: boolean;
	linkKeyMadeAt: Date | null;
	createdAt: Date;
}

/** What the owner or a maker sets; ranges are checked at the edge and again by the table. */
export interface WinderSettings {
	name: string;
	pulsesPerTurn: number;
	rpmMax: number;
	seesDirection: boolean;
	forwardIs: Direction;
	easeEarlyTurns: number;
	stopEarlyTurns: number;
	/** Seconds; null: a coil is never kept by itself. */
	keepAfterS: number | null;
	/** 1 for a real winder; absent leaves it as it is (1 for a new one). */
	timeScale?: number;
}

/** The ranges of the table, for forms and the command. */
export const winderLimits = {
	nameMax: 16,
	pulsesPerTurn: { min: 1, max: 1000 },
	rpmMax: { min: 10, max: 20000 },
	easeEarlyTurns: { min: 0, max: 2000 },
	stopEarlyTurns: { min: 0, max: 500 },
	keepAfterS: { min: 5, max: 600 },
	timeScale: { min: 1, max: 1000 }
} as const;

type Trx = Transaction<Database>;

/** Winders in use, by name. */
export async function listWinders(trx: Trx, workshopId: string): Promise<Winder[]> {
	const rows = await trx
		.selectFrom('winder')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('removed_at', 'is', null)
		.orderBy('name')
		.execute();
	return rows.map(toWinder);
}

/** null: unknown, removed or another workshop's. */
export async function findWinder(trx: Trx, workshopId: string, winderId: string): Promise<Winder | null> {
	if (!isUuid(winderId)) return null;
	const row = await trx
		.selectFrom('winder')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('id', '=', winderId)
		.where('removed_at', 'is', null)
		.executeTakeFirst();
	return row ? toWinder(row) : null;
}

export async function findWinderByName(trx: Trx, workshopId: string, name: string): Promise<Winder | null> {
	const row = await trx
		.selectFrom('winder')
		.selectAll()
		.where('workshop_id', '=', workshopId)
		.where('name', '=', name)
		.where('removed_at', 'is', null)
		.executeTakeFirst();
	return row ? toWinder(row) : null;
}

/** A new winder without a link key. `name-taken` when one in use bears the name. */
export async function addWinder(
	trx: Trx,
	workshopId: string,
	settings: WinderSettings
): Promise<{ ok: true; winder: Winder } | { ok: false; why: 'name-taken' }> {
	const row = await trx
		.insertInto('winder')
		.values({ workshop_id: workshopId, ...columns(settings) })
		.onConflict((oc) => oc.columns(['workshop_id', 'name']).where('removed_at', 'is', null).doNothing())
		.returningAll()
		.executeTakeFirst();
	return row ? { ok: true, winder: toWinder(row) } : { ok: false, why: 'name-taken' };
}

/** Afterwards tell `ingest.configChanged`. */
export async function updateWinder(
	trx: Trx,
	workshopId: string,
	winderId: string,
	settings: WinderSettings
): Promise<'ok' | 'name-taken' | 'not-found'> {
	if (!isUuid(winderId)) return 'not-found';
	const taken = await findWinderByName(trx, workshopId, settings.name);
	if (taken && taken.id !== canonicalId(winderId)) return 'name-taken';
	const result = await trx
		.updateTable('winder')
		.set(columns(settings))
		.where('workshop_id', '=', workshopId)
		.where('id', '=', winderId)
		.where('removed_at', 'is', null)
		.executeTakeFirst();
	return result.numUpdatedRows > 0n ? 'ok' : 'not-found';
}

/**
 * Makes a new link key, shown once and stored hashed; the one before stops working. Afterwards tell
 * `ingest.configChanged`, which closes the links of the old one. null: no such winder.
 */
export async function newLinkKey(trx: Trx, workshopId: string, winderId: string): Promise<string | null> {
	if (!isUuid(winderId)) return null;
	// 256 bits of chance need no slow hash: nothing can be guessed, and a winder shows its key with every request.
	const linkKey = randomBytes(32).toString('base64url');
	const result = await trx
		.updateTable('winder')
		.set({ link_key_hash: hashLinkKey(linkKey), link_key_made_at: new Date() })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', winderId)
		.where('removed_at', 'is', null)
		.executeTakeFirst();
	return result.numUpdatedRows > 0n ? linkKey : null;
}

/** Afterwards tell `ingest.configChanged`. */
export async function revokeLinkKey(trx: Trx, workshopId: string, winderId: string): Promise<'ok' | 'not-found'> {
	if (!isUuid(winderId)) return 'not-found';
	const result = await trx
		.updateTable('winder')
		.set({ link_key_hash: null, link_key_made_at: null })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', winderId)
		.executeTakeFirst();
	return result.numUpdatedRows > 0n ? 'ok' : 'not-found';
}

/**
 * Takes a winder out of use; its runs stay. `has-run`: a coil lies on its bench, and is put back, kept or set aside first.
 * Afterwards tell `ingest.configChanged`.
 */
export async function removeWinder(
	trx: Trx,
	workshopId: string,
	winderId: string
): Promise<'ok' | 'has-run' | 'not-found'> {
	if (!isUuid(winderId)) return 'not-found';
	// Locked first: a bench that takes a coil refers to this row and waits, or has taken it and is seen below.
	const row = await trx
		.selectFrom('winder')
		.select('id')
		.where('workshop_id', '=', workshopId)
		.where('id', '=', winderId)
		.where('removed_at', 'is', null)
		.forUpdate()
		.executeTakeFirst();
	if (!row) return 'not-found';
	const open = await trx
		.selectFrom('run')
		.select('id')
		.where('workshop_id', '=', workshopId)
		.where('winder_id', '=', winderId)
		.where('state', '=', 'open')
		.limit(1)
		.executeTakeFirst();
	if (open) return 'has-run';
	await trx
		.updateTable('winder')
		.set({ removed_at: new Date(), link_key_hash: null, link_key_made_at: null })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', winderId)
		.execute();
	return 'ok';
}

/** Whose link key this is, before the workshop is known. */
export async function findLinkKey(
	db: Kysely<Database>,
	linkKey: string
): Promise<{ workshopId: string; winderId: string } | null> {
	const found = await sql<{ workshop_id: string; winder_id: string }>`
		select workshop_id, winder_id from find_link_key(${hashLinkKey(linkKey)})`.execute(db);
	const row = found.rows[0];
	return row ? { workshopId: row.workshop_id, winderId: row.winder_id } : null;
}

export function hashLinkKey(linkKey: string): Buffer {
	return createHash('sha256').update(linkKey, 'utf8').digest();
}

function columns(settings: WinderSettings) {
	return {
		name: settings.name,
		pulses_per_turn: settings.pulsesPerTurn,
		rpm_max: settings.rpmMax,
		sees_direction: settings.seesDirection,
		forward_is: settings.forwardIs,
		ease_early_turns: settings.easeEarlyTurns,
		stop_early_turns: settings.stopEarlyTurns,
		keep_after_s: settings.keepAfterS,
		...(settings.timeScale === undefined ? {} : { time_scale: settings.timeScale })
	};
}

function toWinder(row: Selectable<WinderTable>): Winder {
	return {
		id: row.id,
		workshopId: row.workshop_id,
		name: row.name,
		config: {
			pulsesPerTurn: row.pulses_per_turn,
			rpmMax: row.rpm_max,
			seesDirection: row.sees_direction,
			forwardIs: row.forward_is,
			easeEarlyTurns: row.ease_early_turns,
			stopEarlyTurns: row.stop_early_turns,
			timeScale: row.time_scale,
			keepAfterMs: row.keep_after_s === null ? null : row.keep_after_s * 1000
		},
		hasLinkKey: row.link_key_hash !== null,
		linkKeyMadeAt: row.link_key_made_at,
		createdAt: row.created_at
	};
}
