import { sql, type Kysely } from 'kysely';
import { connect } from './connect.ts';
import type { Database } from './schema.ts';

/** What only the operator's commands do: they sign in as the owner, whom the policies do not bind. */

/** Gives a new cluster the role that owns the tables and its database. `superUrl` signs in as the superuser. */
export async function makeOwnerAndDatabase(
	superUrl: string,
	owner: string,
	password: string,
	database: string
): Promise<void> {
	const db = connect(superUrl, { max: 1 });
	try {
		const role = sql.id(owner);
		await sql`create role ${role} login createrole createdb password ${sql.lit(password)}`.execute(db);
		await sql`create database ${sql.id(database)} owner ${role}`.execute(db);
	} finally {
		await db.destroy();
	}
}

/** A new database in the cluster of `db`, as a copy of `template` where one is given. Nobody may be connected to that. */
export async function createDatabase(db: Kysely<Database>, name: string, template?: string): Promise<void> {
	const from = template === undefined ? sql`` : sql`template ${sql.id(template)}`;
	await sql`create database ${sql.id(name)} ${from}`.execute(db);
}

/** Drops a database with everybody in it. Nothing happens when there is none of that name. */
export async function dropDatabase(db: Kysely<Database>, name: string): Promise<void> {
	await sql`drop database if exists ${sql.id(name)} with (force)`.execute(db);
}
