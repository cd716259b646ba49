import { sql } from 'kysely';
import { migrationState } from './migrate.ts';
import type { Db } from './schema.ts';

/** Whether the database answers, to the role that owns nothing, with the migrations this code needs. Never throws. */
export async function databaseHealth(db: Db): Promise<{ ok: true } | { ok: false; why: string }> {
	try {
		const { rows } = await sql<{ role: string }>`select current_user as role`.execute(db);
		if (rows[0]?.role !== 'turnstead_app') {
			return { ok: false, why: `the database is used as ${rows[0]?.role}, not as turnstead_app` };
		}
		return await migrationState(db);
	} catch (error) {
		return {
			ok: false,
			why: `the database does not answer: ${error instanceof Error ? error.message : String(error)}`
		};
	}
}
