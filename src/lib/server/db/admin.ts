import { sql, type Kysely } from 'kysely';
import type { FactKind, RunFigures } from '../../winding/types.ts';
import { connect } from './connect.ts';
import type { RunTrace } from './runs.ts';
import type { Database, Role } from './schema.ts';

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

export async function anyWorkshop(db: Kysely<Database>): Promise<boolean> {
	return (await db.selectFrom('workshop').select('id').limit(1).executeTakeFirst()) !== undefined;
}

export interface WorkshopInput {
	/** Lower-case letters, digits and hyphens, beginning with a letter. */
	shortName: string;
	name: string;
	/** IANA name, such as Europe/Berlin. */
	timeZone: string;
}

/** Its id. Throws where the short name is taken or a field does not fit; the command checks first. */
export async function insertWorkshop(db: Kysely<Database>, workshop: WorkshopInput): Promise<string> {
	const row = await db
		.insertInto('workshop')
		.values({ short_name: workshop.shortName, name: workshop.name, time_zone: workshop.timeZone })
		.returning('id')
		.executeTakeFirstOrThrow();
	return row.id;
}

export interface WorkshopRow {
	id: string;
	shortName: string;
	name: string;
	timeZone: string;
}

export async function findWorkshop(db: Kysely<Database>, shortName: string): Promise<WorkshopRow | null> {
	return (await listWorkshops(db)).find((workshop) => workshop.shortName === shortName) ?? null;
}

export async function listWorkshops(db: Kysely<Database>): Promise<WorkshopRow[]> {
	return db
		.selectFrom('workshop')
		.select(['id', 'short_name as shortName', 'name', 'time_zone as timeZone'])
		.orderBy('short_name')
		.execute();
}

/** A person who can sign in at once. Their id. */
export async function insertMemberWithPassword(
	db: Kysely<Database>,
	workshopId: string,
	person: { name: string; email: string; role: Role; passwordHash: string }
): Promise<string> {
	const row = await db
		.insertInto('member')
		.values({
			workshop_id: workshopId,
			email: person.email,
			name: person.name,
			role: person.role,
			password_hash: person.passwordHash
		})
		.returning('id')
		.executeTakeFirstOrThrow();
	return row.id;
}

/** The stored hash of whoever works here under an address; null: nobody does, or no password was chosen yet. */
export async function passwordHashOf(db: Kysely<Database>, email: string): Promise<string | null> {
	const row = await db
		.selectFrom('member')
		.select('password_hash')
		.where('email', '=', email)
		.where('removed_at', 'is', null)
		.executeTakeFirst();
	return row?.password_hash ?? null;
}

/** Throws when the database does not answer. */
export async function ping(db: Kysely<Database>): Promise<void> {
	await sql`select 1`.execute(db);
}

/** A run that was wound and kept before this database stood. */
export interface PastRun {
	runId: string;
	coilId: string;
	winderId: string;
	startedAt: Date;
	endedAt: Date;
	memberId: string;
	figures: RunFigures;
	trace: RunTrace;
	/** In order, numbered on from `firstNo`. */
	facts: {
		kind: FactKind;
		at: Date;
		turns: number;
		detail: Record<string, string | number | boolean | null>;
		memberId: string | null;
	}[];
	firstNo: number;
}

/** Closes a run that was taken as kept, with its trace and what happened, as the recorder would have. */
export async function keepPastRun(db: Kysely<Database>, workshopId: string, past: PastRun): Promise<void> {
	const { runId, figures, trace } = past;
	await db
		.updateTable('run')
		.set({
			state: 'kept',
			started_at: past.startedAt,
			ended_at: past.endedAt,
			ended_by: past.memberId,
			turns: figures.turns,
			on_bobbin: figures.onBobbin,
			winding_ms: Math.round(figures.windingMs),
			stopped_ms: Math.round(figures.stoppedMs),
			rpm_mean: figures.rpmMean,
			rpm_top: figures.rpmTop,
			taken_back: figures.takenBack,
			looks: JSON.stringify(figures.looks),
			snaps: JSON.stringify(figures.snaps),
			faults: JSON.stringify(figures.faults)
		})
		.where('workshop_id', '=', workshopId)
		.where('id', '=', runId)
		.execute();
	await db
		.updateTable('coil')
		.set({ state: 'wound' })
		.where('workshop_id', '=', workshopId)
		.where('id', '=', past.coilId)
		.execute();
	await db
		.insertInto('run_trace')
		.values({ workshop_id: workshopId, run_id: runId, at_ms: trace.atMs, turns: trace.turns, rpm: trace.rpm })
		.execute();
	await db
		.insertInto('fact')
		.values(
			past.facts.map((fact, i) => ({
				workshop_id: workshopId,
				winder_id: past.winderId,
				no: past.firstNo + i,
				run_id: runId,
				kind: fact.kind,
				at: fact.at,
				turns: fact.turns,
				detail: JSON.stringify(fact.detail),
				member_id: fact.memberId
			}))
		)
		.execute();
}

/** Says that a revision was written and used at other times than now. */
export async function dateRevision(
	db: Kysely<Database>,
	workshopId: string,
	specId: string,
	no: number,
	savedAt: Date,
	usedAt: Date | null
): Promise<void> {
	await sql`
		update spec_revision set created_at = ${savedAt}, saved_at = date_trunc('milliseconds', ${savedAt}::timestamptz),
			used_at = ${usedAt}
		where workshop_id = ${workshopId} and spec_id = ${specId} and no = ${no}`.execute(db);
}

/** Says that all readings of a run were taken at another time than now. */
export async function dateReadings(
	db: Kysely<Database>,
	workshopId: string,
	runId: string,
	takenAt: Date
): Promise<void> {
	await db
		.updateTable('reading')
		.set({ taken_at: takenAt })
		.where('workshop_id', '=', workshopId)
		.where('run_id', '=', runId)
		.execute();
}
