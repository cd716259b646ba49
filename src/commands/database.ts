import { ping } from '../lib/server/db/admin.ts';
import { connect } from '../lib/server/db/connect.ts';
import { migrate } from '../lib/server/db/migrate.ts';
import type { Db } from '../lib/server/db/schema.ts';
import { PlainError, codeOf } from './plain-error.ts';

/** Connects as the owner of the tables, works, and ends the connection. What goes wrong comes as a PlainError. */
export async function asOwner<T>(url: string, work: (db: Db) => Promise<T>): Promise<T> {
	const db = connect(url, { max: 2, onLost: () => {} });
	try {
		await ping(db);
	} catch (error) {
		await db.destroy();
		throw unreachable(url, error);
	}
	try {
		return await work(db);
	} catch (error) {
		throw plain(error);
	} finally {
		await db.destroy();
	}
}

/** The names of the migrations it ran. Throws PlainError when the database cannot be brought to this code. */
export async function migrateOrSay(db: Db): Promise<string[]> {
	const migrated = await migrate(db);
	if (!migrated.ok) throw new PlainError(migrated.why);
	return migrated.done;
}

const DISK_FULL = '53100';
const READ_ONLY = '25006';
const INSUFFICIENT_PRIVILEGE = '42501';

function plain(error: unknown): unknown {
	switch (codeOf(error)) {
		case DISK_FULL:
			return new PlainError(`The disk of the database is full: make room, then start again. What was stored is kept.`);
		case READ_ONLY:
			return new PlainError('The database only lets itself be read: DATABASE_URL must name one that can be written.');
		case INSUFFICIENT_PRIVILEGE:
			return new PlainError(
				`Whoever DATABASE_URL signs in may not do this: ${(error as Error).message}. ` +
					'It must own the database and may need CREATEROLE, for the role the program works as.'
			);
		default:
			return error;
	}
}

/** The address without its password, as it may be shown. */
function shown(url: string): string {
	try {
		const { hostname, port, pathname, username } = new URL(url);
		return `${username ? `${username}@` : ''}${hostname}${port ? `:${port}` : ''}${pathname}`;
	} catch {
		return 'DATABASE_URL';
	}
}

function unreachable(url: string, error: unknown): PlainError {
	const where = shown(url);
	const message = error instanceof Error && error.message ? error.message : codeOf(error);
	switch (codeOf(error)) {
		case 'ECONNREFUSED':
			return new PlainError(`No database answers at ${where}. Start it, or correct DATABASE_URL.`);
		case 'ENOTFOUND':
		case 'EAI_AGAIN':
			return new PlainError(`The machine of the database, ${where}, is not known by that name. Correct DATABASE_URL.`);
		case '28P01':
		case '28000':
			return new PlainError(
				`The database at ${where} does not accept this sign-in. Correct the name or password in DATABASE_URL.`
			);
		case '3D000':
			return new PlainError(`There is no such database at ${where}. Make it (createdb), or correct DATABASE_URL.`);
		default:
			return new PlainError(
				`The database at ${where} cannot be reached: ${message}. Correct DATABASE_URL, or start the database.`
			);
	}
}
