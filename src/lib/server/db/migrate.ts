import { readdirSync } from 'node:fs';
import { dirname, join } from 'node:path';
import { fileURLToPath, pathToFileURL } from 'node:url';
import { sql, Migrator, type Kysely, type Migration } from 'kysely';
import type { Database } from './schema.ts';

/** The names of migrations/, put in by the build: the bundle carries no migrations, but must know which it needs. */
declare const __MIGRATION_NAMES__: string[] | undefined;

const HISTORY = 'kysely_migration';
const UNDEFINED_TABLE = '42P01';

export type MigrationState = { ok: true } | { ok: false; why: string };

/** Migrations this version of the code was written for, oldest first: `0001-first-coil`, … */
export function expectedMigrations(): string[] {
	if (typeof __MIGRATION_NAMES__ !== 'undefined') return __MIGRATION_NAMES__;
	return namesIn(migrationsFolder());
}

export function namesIn(folder: string): string[] {
	return readdirSync(folder)
		.filter((file) => /^\d{4}-[a-z0-9-]+\.ts$/.test(file))
		.map((file) => file.slice(0, -'.ts'.length))
		.sort();
}

function migrationsFolder(): string {
	return join(dirname(fileURLToPath(import.meta.url)), '../../../../migrations');
}

/** Whether the database is as this code needs it. Throws when the database cannot be asked. */
export async function migrationState(db: Kysely<Database>): Promise<MigrationState> {
	const expected = expectedMigrations();
	const done = await migrationsDone(db);
	const newer = done.filter((name) => !expected.includes(name));
	if (newer.length > 0) return { ok: false, why: `the database is newer than this code: it holds ${newer.join(', ')}` };
	const missing = expected.filter((name) => !done.includes(name));
	if (missing.length > 0) return { ok: false, why: `the database needs ${missing.join(', ')}` };
	return { ok: true };
}

async function migrationsDone(db: Kysely<Database>): Promise<string[]> {
	try {
		const { rows } = await sql<{ name: string }>`select name from ${sql.table(HISTORY)} order by name`.execute(db);
		return rows.map((row) => row.name);
	} catch (error) {
		if ((error as { code?: string }).code === UNDEFINED_TABLE) return [];
		throw error;
	}
}

export type Migrated = { ok: true; done: string[] } | { ok: false; why: string };

/**
 * Brings the database to this code. `db` must be signed in as the owner, without a role. Runs under tsx only, because the
 * migrations are TypeScript outside the bundle. A database newer than the code is left as it is.
 */
export async function migrate(db: Kysely<Database>): Promise<Migrated> {
	const expected = expectedMigrations();
	const newer = (await migrationsDone(db)).filter((name) => !expected.includes(name));
	if (newer.length > 0) {
		return {
			ok: false,
			why:
				`The database was used by a newer Turnstead: it holds ${newer.join(', ')}, which this version does not know. ` +
				`Nothing was changed. Start the newer version, or use another database.`
		};
	}
	const migrator = new Migrator({ db, provider: { getMigrations: loadMigrations } });
	const { error, results } = await migrator.migrateToLatest();
	if (error !== undefined) {
		const at = results?.find((result) => result.status === 'Error')?.migrationName;
		const reason = error instanceof Error ? error.message : String(error);
		return { ok: false, why: `Migration ${at ?? '(none)'} failed and was taken back: ${reason}` };
	}
	// The served program works as a role that owns nothing; health needs to read which migrations are there.
	await sql`grant select on ${sql.table(HISTORY)} to turnstead_app`.execute(db);
	return { ok: true, done: results?.map((result) => result.migrationName) ?? [] };
}

async function loadMigrations(): Promise<Record<string, Migration>> {
	const folder = migrationsFolder();
	const found: Record<string, Migration> = {};
	for (const name of expectedMigrations()) {
		const address = pathToFileURL(join(folder, `${name}.ts`)).href;
		found[name] = (await import(/* @vite-ignore */ address)) as Migration;
	}
	return found;
}
