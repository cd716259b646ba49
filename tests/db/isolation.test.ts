import { createHash, randomUUID } from 'node:crypto';
import { sql, type Kysely, type Transaction } from 'kysely';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { usualUnits } from '../../src/lib/coil/units.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import type { Database } from '../../src/lib/server/db/schema.ts';
import { startingSpec } from '../../src/lib/spec/start.ts';
import { freshDatabase } from './harness.ts';

/** Tables that belong to no workshop: the record of migrations, which the program may read and nothing else. */
const exempt = ['kysely_migration', 'kysely_migration_lock'];

/** Tables the program deletes nothing from, its own rows included: what is no more is marked, and stays to be read. */
const neverDeleted = ['workshop', 'spec', 'spec_revision', 'spool', 'meter', 'reading'];

const ROW_REFUSED = '42501'; // insufficient_privilege: what a policy or a missing grant raises
const KEY_REFUSED = '23503'; // foreign_key_violation

interface Table {
	name: string;
	/** The column that holds the workshop: `id` of the workshop itself, `workshop_id` elsewhere. */
	key: string;
}

interface ForeignKey {
	table: string;
	name: string;
	columns: string[];
	target: string;
	targetColumns: string[];
}

// Read before the tests are named, so that a table of a later migration is tested without anybody thinking of it.
const db = await freshDatabase();

const tables = (
	await sql<{ name: string }>`
		select c.relname as name from pg_class c join pg_namespace n on n.oid = c.relnamespace
		where n.nspname = 'public' and c.relkind in ('r', 'p') order by 1`.execute(db.owner)
).rows
	.filter(({ name }) => !exempt.includes(name))
	.map(({ name }): Table => ({ name, key: name === 'workshop' ? 'id' : 'workshop_id' }));

const foreignKeys = (
	await sql<ForeignKey>`
		select c.conrelid::regclass::text as table, c.conname as name, c.confrelid::regclass::text as target,
			array(select a.attname::text from unnest(c.conkey) with ordinality k(no, i)
				join pg_attribute a on a.attrelid = c.conrelid and a.attnum = k.no order by k.i) as columns,
			array(select a.attname::text from unnest(c.confkey) with ordinality k(no, i)
				join pg_attribute a on a.attrelid = c.confrelid and a.attnum = k.no order by k.i) as "targetColumns"
		from pg_constraint c join pg_namespace n on n.oid = c.connamespace
		where c.contype = 'f' and n.nspname = 'public' order by 1, 2`.execute(db.owner)
).rows;

interface Shop {
	id: string;
	email: string;
	removedEmail: string;
	memberId: string;
	winderId: string;
	linkKeyHash: Buffer;
	removedLinkKeyHash: Buffer;
	linkHash: Buffer;
	usedLinkHash: Buffer;
	oldLinkHash: Buffer;
	removedLinkHash: Buffer;
}

const hashOf = (text: string) => createHash('sha256').update(text).digest();

/** A workshop with at least one row in every table. */
async function sow(owner: Kysely<Database>, shortName: string): Promise<Shop> {
	const workshop_id = randomUUID();
	const ids = Array.from({ length: 8 }, () => randomUUID());
	const [memberId = '', removedId = '', winderId = '', coilId = '', runId = '', specId = '', spoolId = ''] = ids;
	const meterId = ids[7]!;
	const shop: Shop = {
		id: workshop_id,
		email: `ada@${shortName}.example`,
		removedEmail: `gone@${shortName}.example`,
		memberId,
		winderId,
		linkKeyHash: hashOf(`${shortName} key`),
		removedLinkKeyHash: hashOf(`${shortName} removed key`),
		linkHash: hashOf(`${shortName} link`),
		usedLinkHash: hashOf(`${shortName} used link`),
		oldLinkHash: hashOf(`${shortName} old link`),
		removedLinkHash: hashOf(`${shortName} removed link`)
	};
	const at = '2026-12-01T09:00:00Z';
	const later = sql<Date>`now() + interval '1 day'`;
	await owner
		.insertInto('workshop')
		.values({ id: workshop_id, short_name: shortName, name: shortName, time_zone: 'UTC' })
		.execute();
	await owner
		.insertInto('member')
		.values([
			{
				workshop_id,
				id: memberId,
				email: shop.email,
				name: 'Ada Quill',
				role: 'owner',
				password_hash: 'hash',
				units: JSON.stringify(usualUnits)
			},
			{
				workshop_id,
				id: removedId,
				email: shop.removedEmail,
				name: 'Bo Reed',
				role: 'maker',
				password_hash: 'hash',
				removed_at: at
			}
		])
		.execute();
	await owner
		.insertInto('password_link')
		.values([
			{ workshop_id, member_id: memberId, token_hash: shop.linkHash, expires_at: later },
			{ workshop_id, member_id: memberId, token_hash: shop.usedLinkHash, expires_at: later, used_at: at },
			{ workshop_id, member_id: memberId, token_hash: shop.oldLinkHash, expires_at: sql<Date>`now()` },
			{ workshop_id, member_id: removedId, token_hash: shop.removedLinkHash, expires_at: later }
		])
		.execute();
	await owner
		.insertInto('winder')
		.values([
			{ workshop_id, id: winderId, name: 'w-01', link_key_hash: shop.linkKeyHash },
			{ workshop_id, name: 'w-02', link_key_hash: shop.removedLinkKeyHash, removed_at: at }
		])
		.execute();
	await owner.insertInto('spec').values({ workshop_id, id: specId, created_by: memberId }).execute();
	const content = startingSpec('two-coils', 'Evening bridge');
	await owner
		.insertInto('spec_revision')
		.values(
			// Nothing refers to the second.
			[1, 2].map((no) => ({
				workshop_id,
				spec_id: specId,
				no,
				name: content.name,
				content: JSON.stringify(content),
				created_by: memberId
			}))
		)
		.execute();
	await owner
		.insertInto('spool')
		.values({
			workshop_id,
			id: spoolId,
			name: 'Red reel',
			wire: JSON.stringify(content.wire),
			created_by: memberId
		})
		.execute();
	const range = { upToOhm: 20_000, percent: 0.5, counts: 2, ohmPerCount: 10 };
	await owner
		.insertInto('meter')
		.values({ workshop_id, id: meterId, name: 'Yellow meter', ranges: JSON.stringify([range]) })
		.execute();
	const plan = {
		target: 5320,
		look_every: 500,
		direction: 'counter-clockwise' as const,
		spec_id: specId,
		spec_revision_no: 1,
		spec_coil: 0,
		spool_id: spoolId,
		first_look: 100,
		full_turns: 6200
	};
	await owner
		.insertInto('coil')
		.values({ workshop_id, id: coilId, name: 'Bridge', ...plan, place: 1, winder_id: winderId, created_by: memberId })
		.execute();
	await owner
		.insertInto('run')
		.values({
			workshop_id,
			id: runId,
			coil_id: coilId,
			winder_id: winderId,
			coil_name: 'Bridge',
			...plan,
			top_faces: 'out',
			tolerance_turns: 5,
			taken_at: at,
			ended_by: memberId,
			sticker: 'HL-1'
		})
		.execute();
	await owner.updateTable('coil').set({ again_of_run: runId }).where('id', '=', coilId).execute();
	await owner
		.insertInto('reading')
		.values({
			workshop_id,
			run_id: runId,
			kind: 'resistance',
			stage: 'wound',
			value: 3700,
			temperature_c: 21,
			meter_id: meterId,
			meter_name: 'Yellow meter',
			meter_range: JSON.stringify(range),
			taken_by: memberId,
			struck_at: at,
			struck_by: memberId
		})
		.execute();
	await owner
		.insertInto('run_trace')
		.values({ workshop_id, run_id: runId, at_ms: [0], turns: [0], rpm: [0] })
		.execute();
	const boot = { workshop_id, winder_id: winderId, boot: '00000001', n: 1, e: 1, t: 1 };
	await owner
		.insertInto('boot')
		.values({ ...boot, forward: 1, reverse: 0, first_at: at, last_at: at })
		.execute();
	await owner
		.insertInto('kept_line')
		.values({ ...boot, f: 1, v: 0, received_at: at })
		.execute();
	await owner
		.insertInto('winder_state')
		.values({ workshop_id, winder_id: winderId, state: '{}', fact_no: 1, saved_at: at })
		.execute();
	await owner
		.insertInto('fact')
		.values({
			workshop_id,
			winder_id: winderId,
			no: 1,
			run_id: runId,
			kind: 'kept',
			at,
			member_id: memberId,
			detail: '{}'
		})
		.execute();
	return shop;
}

let a: Shop;
let b: Shop;

beforeAll(async () => {
	a = await sow(db.owner, 'hollow-lane');
	b = await sow(db.owner, 'other');
});
afterAll(async () => {
	await db.drop();
});

const asA = <T>(work: (trx: Transaction<Database>) => Promise<T>) => inWorkshop(db.app, a.id, work);

async function count(trx: Kysely<Database>, table: Table, workshopId?: string): Promise<number> {
	const where = workshopId === undefined ? sql`` : sql`where ${sql.ref(table.key)} = ${workshopId}`;
	const { rows } = await sql<{ n: number }>`select count(*) as n from ${sql.table(table.name)} ${where}`.execute(trx);
	return rows[0]!.n;
}

/** The SQLSTATE an attempt ends with; undefined when it went through. */
async function refusal(attempt: Promise<unknown>): Promise<string | undefined> {
	return attempt.then(
		() => undefined,
		(cause: { code?: string }) => cause.code
	);
}

describe('the role the program works as', () => {
	it('bypasses nothing and owns nothing', async () => {
		const { rows } = await sql<{ super: boolean; bypass: boolean; owned: number }>`
			select r.rolsuper as super, r.rolbypassrls as bypass,
				(select count(*) from pg_class c where c.relowner = r.oid) as owned
			from pg_roles r where r.rolname = current_user and r.rolname = 'turnstead_app'`.execute(db.app);
		expect(rows).toEqual([{ super: false, bypass: false, owned: 0 }]);
	});
	it.each(exempt)('cannot change %s', async (name) => {
		const { rows } = await sql<{ any: boolean }>`
			select has_table_privilege('turnstead_app', ${name}, 'insert, update, delete, truncate') as any`.execute(db.owner);
		expect(rows).toEqual([{ any: false }]);
	});
	it('cannot empty a table past the policies', async () => {
		const { rows } = await sql<{ name: string }>`
			select c.relname as name from pg_class c join pg_namespace n on n.oid = c.relnamespace
			where n.nspname = 'public' and c.relkind in ('r', 'p')
				and has_table_privilege('turnstead_app', c.oid, 'truncate, references, trigger')`.execute(db.owner);
		expect(rows).toEqual([]);
	});
	it('sees no view: a view would read with its owner’s rights', async () => {
		const { rows } = await sql`
			select c.relname from pg_class c join pg_namespace n on n.oid = c.relnamespace
			where n.nspname = 'public' and c.relkind in ('v', 'm', 'f')`.execute(db.owner);
		expect(rows).toEqual([]);
	});
});

describe.each(tables)('table $name', (table) => {
	it('has row-level security and a policy for all commands that compares its workshop', async () => {
		const { rows } = await sql<{ on: boolean; policies: { cmd: string; using: string; check: string }[] }>`
			select c.relrowsecurity as on, (
				select coalesce(json_agg(json_build_object('cmd', p.polcmd,
					'using', pg_get_expr(p.polqual, p.polrelid), 'check', pg_get_expr(p.polwithcheck, p.polrelid))), '[]')
				from pg_policy p where p.polrelid = c.oid) as policies
			from pg_class c where c.oid = ${table.name}::regclass`.execute(db.owner);
		const own = `(${table.key} = current_workshop())`;
		expect(rows).toEqual([{ on: true, policies: [{ cmd: '*', using: own, check: own }] }]);
	});

	it('has rows of both workshops in this test', async () => {
		expect(await count(db.owner, table, a.id)).toBeGreaterThan(0);
		expect(await count(db.owner, table, b.id)).toBeGreaterThan(0);
	});

	it('shows a workshop its own rows and none of another', async () => {
		expect(await asA((trx) => count(trx, table, b.id))).toBe(0);
		expect(await asA((trx) => count(trx, table))).toBe(await count(db.owner, table, a.id));
	});

	it('shows nothing without a workshop, with an empty one, and after a commit', async () => {
		const empty = db.app.transaction().execute(async (trx) => {
			await sql`select set_config('turnstead.workshop', '', true)`.execute(trx);
			return count(trx, table);
		});
		expect(await empty).toBe(0);
		const after = await db.app.connection().execute(async (one) => {
			await inWorkshop(one, a.id, (trx) => count(trx, table));
			return count(one, table);
		});
		expect(after).toBe(0);
	});

	it('takes no row for another workshop', async () => {
		const { rows } = await sql<{ row: string }>`
			select to_jsonb(whole_row)::text as row from ${sql.table(table.name)} whole_row
			where ${sql.ref(table.key)} = ${b.id} limit 1`.execute(db.owner);
		const copy = (trx: Kysely<Database>) =>
			sql`insert into ${sql.table(table.name)}
				select * from jsonb_populate_record(null::${sql.table(table.name)}, ${rows[0]!.row}::jsonb)`.execute(trx);
		expect(await refusal(asA(copy))).toBe(ROW_REFUSED);
		expect(await refusal(db.app.transaction().execute(copy))).toBe(ROW_REFUSED);
	});

	it('changes no row of another workshop, and gives none away', async () => {
		const key = sql.ref(table.key);
		const touched = await asA((trx) =>
			sql`update ${sql.table(table.name)} set ${key} = ${key} where ${key} = ${b.id}`.execute(trx)
		);
		expect(touched.numAffectedRows).toBe(0n);
		const all = await asA((trx) => sql`update ${sql.table(table.name)} set ${key} = ${key}`.execute(trx));
		expect(all.numAffectedRows).toBe(BigInt(await count(db.owner, table, a.id)));
		const given = asA((trx) => sql`update ${sql.table(table.name)} set ${key} = ${b.id}`.execute(trx));
		expect(await refusal(given)).toBe(ROW_REFUSED);
	});

	it('deletes no row of another workshop', async () => {
		const before = await count(db.owner, table, b.id);
		const attempt = asA((trx) =>
			sql`delete from ${sql.table(table.name)} where ${sql.ref(table.key)} = ${b.id}`.execute(trx)
		);
		if (neverDeleted.includes(table.name)) expect(await refusal(attempt)).toBe(ROW_REFUSED);
		else expect((await attempt).numAffectedRows).toBe(0n);
		expect(await count(db.owner, table, b.id)).toBe(before);
	});
});

describe('every foreign key', () => {
	it.each(foreignKeys)('$name carries the workshop', ({ columns, target, targetColumns }) => {
		const at = columns.indexOf('workshop_id');
		expect(at).toBeGreaterThanOrEqual(0);
		expect(targetColumns[at]).toBe(target === 'workshop' ? 'id' : 'workshop_id');
	});

	const within = foreignKeys.filter(({ target }) => target !== 'workshop');
	it.each(within)(
		'$name refers to no row of another workshop',
		async ({ table, name, columns, target, targetColumns }) => {
			const pairs = columns
				.map((column, i) => ({ column, target: targetColumns[i]! }))
				.filter(({ column }) => column !== 'workshop_id');
			expect(pairs.length).toBeGreaterThan(0);
			const { rows } = await sql<Record<string, string | number>>`
			select ${sql.join(pairs.map((pair) => sql.ref(pair.target)))} from ${sql.table(target)}
			where workshop_id = ${b.id} limit 1`.execute(db.owner);
			const there = rows[0]!;
			const set = sql.join(pairs.map((pair) => sql`${sql.ref(pair.column)} = ${there[pair.target]}`));
			// A row that others refer to would be refused for their sake; a second revision has none.
			const unreferred = table === 'spec_revision' ? sql`where no = 2` : sql``;
			const attempt = asA((trx) =>
				sql`update ${sql.table(table)} set ${set}
				where ctid = (select ctid from ${sql.table(table)} ${unreferred} limit 1)`.execute(trx)
			);
			const cause = await attempt.then(
				() => null,
				(error: { code?: string; constraint?: string }) => error
			);
			expect(cause).toMatchObject({ code: KEY_REFUSED, constraint: name });
		}
	);
});

describe('what is found before the workshop is known', () => {
	it('goes through these functions alone, each with a fixed search path and closed to everybody else', async () => {
		const { rows } = await sql<{ name: string; path: string[]; open: boolean }>`
			select p.proname as name, p.proconfig as path, has_function_privilege('public', p.oid, 'execute') as open
			from pg_proc p join pg_namespace n on n.oid = p.pronamespace
			where n.nspname = 'public' and p.prosecdef order by 1`.execute(db.owner);
		const path = ['search_path=public, pg_temp'];
		expect(rows).toEqual([
			{ name: 'find_link_key', path, open: false },
			{ name: 'find_password_link', path, open: false },
			{ name: 'find_sign_in', path, open: false }
		]);
	});

	const find = async (name: string, secret: string | Buffer) =>
		(await sql<Record<string, unknown>>`select * from ${sql.raw(name)}(${secret})`.execute(db.app)).rows;

	it('an address gives the one sign-in behind it, whatever its case', async () => {
		expect(await find('find_sign_in', b.email.toUpperCase())).toEqual([
			{
				workshop_id: b.id,
				member_id: b.memberId,
				name: 'Ada Quill',
				role: 'owner',
				password_hash: 'hash',
				session_epoch: 0
			}
		]);
	});
	it('an unknown, empty, patterned or removed address gives nothing', async () => {
		for (const address of ['nobody@else.example', '', '%', b.removedEmail]) {
			expect(await find('find_sign_in', address), address).toEqual([]);
		}
	});
	it('a link key gives its winder and no more', async () => {
		expect(await find('find_link_key', b.linkKeyHash)).toEqual([{ workshop_id: b.id, winder_id: b.winderId }]);
	});
	it('an unknown key and the key of a removed winder give nothing', async () => {
		for (const hash of [hashOf('guess'), Buffer.alloc(0), b.removedLinkKeyHash]) {
			expect(await find('find_link_key', hash)).toEqual([]);
		}
	});
	it('a password link gives its person and no more', async () => {
		expect(await find('find_password_link', b.linkHash)).toEqual([
			{ workshop_id: b.id, member_id: b.memberId, link_id: expect.any(String) }
		]);
	});
	it('an unknown, used or ended link and one of a removed person give nothing', async () => {
		for (const hash of [hashOf('guess'), b.usedLinkHash, b.oldLinkHash, b.removedLinkHash]) {
			expect(await find('find_password_link', hash)).toEqual([]);
		}
	});
});
