import { CompiledQuery, Kysely, PostgresDialect, sql, type Transaction } from 'kysely';
import pg from 'pg';
import type { Database } from './schema.ts';

/** Connections a pool holds at most. A request holds one for some milliseconds; PostgreSQL allows 100 in all. */
const CONNECTIONS_MAX = 10;
/** A request waits no longer than this for a connection before it is told that the database is away. */
const CONNECT_MS_MAX = 5_000;

const INT8 = 20;
const NUMERIC = 1700;
const INT8_ARRAY = 1016;
const NUMERIC_ARRAY = 1231;

type Parser = (text: string) => unknown;

// pg hands these out as text, because they may pass 2^53. Turns, milliseconds and counters here never do.
const numberArray: Parser = (text) =>
	text === '{}'
		? []
		: text
				.slice(1, -1)
				.split(',')
				.map((item) => (item === 'NULL' ? null : Number(item)));
const parsers = new Map<number, Parser>([
	[INT8, Number],
	[NUMERIC, Number],
	[INT8_ARRAY, numberArray],
	[NUMERIC_ARRAY, numberArray]
]);

const types = {
	getTypeParser(oid: number, format?: 'text' | 'binary'): Parser {
		const own = format === 'binary' ? undefined : parsers.get(oid);
		return own ?? (pg.types.getTypeParser(oid, format as 'text') as Parser);
	}
} as pg.CustomTypesConfig;

export interface ConnectOptions {
	/** The role every connection works as; without one, the role that signed in. */
	role?: 'turnstead_app';
	/** Connections at most. */
	max?: number;
	/** Hears that an idle connection broke. The pool makes a new one by itself. */
	onLost?: (error: Error) => void;
}

/**
 * A pool on `url`. Nothing connects before the first query. `await db.destroy()` ends it.
 * With `role: 'turnstead_app'` row-level security holds whoever signed in, because the role owns nothing.
 */
export function connect(url: string, options: ConnectOptions = {}): Kysely<Database> {
	const pool = new pg.Pool({
		connectionString: url,
		max: options.max ?? CONNECTIONS_MAX,
		connectionTimeoutMillis: CONNECT_MS_MAX,
		keepAlive: true,
		application_name: 'turnstead',
		types
	});
	// Without a listener a database that restarts would end the process.
	const onLost = options.onLost ?? ((error) => console.warn(`database connection lost: ${error.message}`));
	pool.on('error', onLost);

	const { role } = options;
	return new Kysely<Database>({
		dialect: new PostgresDialect({
			pool,
			onCreateConnection: async (connection) => {
				if (role !== undefined) await connection.executeQuery(CompiledQuery.raw(`set role ${role}`));
			}
		})
	});
}

/**
 * One transaction that sees the rows of one workshop and no others. Queries inside still name the workshop; the policies
 * refuse what a query forgot. Throws what `work` throws, after rolling back.
 */
export function inWorkshop<T>(
	db: Kysely<Database>,
	workshopId: string,
	work: (trx: Transaction<Database>) => Promise<T>
): Promise<T> {
	return db.transaction().execute(async (trx) => {
		await enterWorkshop(trx, workshopId);
		return work(trx);
	});
}

/** Sets the workshop of a running transaction; a batch over several workshops calls it again before each. */
export async function enterWorkshop(trx: Transaction<Database>, workshopId: string): Promise<void> {
	await sql`select set_config('turnstead.workshop', ${workshopId}, true)`.execute(trx);
}
