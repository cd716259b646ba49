import { sql } from 'kysely';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { expectedMigrations, migrate, migrationState } from '../../src/lib/server/db/migrate.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db.drop());

describe('a migrated database', () => {
	test('is right in the eyes of the role the program works as', async () => {
		expect(await migrationState(db.app)).toEqual({ ok: true });
	});

	test('is left alone by a second migration', async () => {
		expect(await migrate(db.owner)).toEqual({ ok: true, done: [] });
	});

	test('says which migration it lacks', async () => {
		const last = expectedMigrations().at(-1);
		await sql`delete from kysely_migration where name = ${last}`.execute(db.owner);
		expect(await migrationState(db.app)).toEqual({ ok: false, why: `the database needs ${last}` });
		await sql`insert into kysely_migration (name, timestamp) values (${last}, ${new Date().toISOString()})`.execute(
			db.owner
		);
		expect(await migrationState(db.app)).toEqual({ ok: true });
	});

	test('that is newer than the code is refused and left as it is', async () => {
		await sql`insert into kysely_migration (name, timestamp) values ('9999-later', ${new Date().toISOString()})`.execute(
			db.owner
		);
		expect(await migrationState(db.app)).toMatchObject({
			ok: false,
			why: expect.stringContaining('newer than this code')
		});
		expect(await migrate(db.owner)).toMatchObject({ ok: false, why: expect.stringContaining('9999-later') });
		await sql`delete from kysely_migration where name = '9999-later'`.execute(db.owner);
	});
});

describe('a connection of the program', () => {
	test('works as the role that owns nothing', async () => {
		const { rows } = await sql<{ who: string }>`select current_user as who`.execute(db.app);
		expect(rows).toEqual([{ who: 'turnstead_app' }]);
	});

	test('reads bigint, numeric and their arrays as numbers', async () => {
		const { rows } =
			await sql`select 5320::bigint as a, 7.5::numeric as b, '{1,NULL,3}'::bigint[] as c, '{}'::numeric[] as d`.execute(
				db.app
			);
		expect(rows).toEqual([{ a: 5320, b: 7.5, c: [1, null, 3], d: [] }]);
	});

	test('sees a workshop inside inWorkshop and none after it', async () => {
		const workshop = await db.owner
			.insertInto('workshop')
			.values({ short_name: 'seen', name: 'Seen', time_zone: 'UTC' })
			.returning('id')
			.executeTakeFirstOrThrow();
		const inside = await inWorkshop(db.app, workshop.id, (trx) =>
			trx.selectFrom('workshop').select('short_name').execute()
		);
		expect(inside).toEqual([{ short_name: 'seen' }]);
		expect(await db.app.selectFrom('workshop').select('short_name').execute()).toEqual([]);
	});
});
