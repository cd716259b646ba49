import { spawn } from 'node:child_process';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { projectFolder } from '../../src/commands/data-folder.ts';
import { verifyPassword } from '../../src/lib/server/auth/passwords.ts';
import { findLinkKey } from '../../src/lib/server/db/winders.ts';
import { childEnv } from '../../src/lib/server/env.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db.drop());

interface Said {
	code: number | null;
	out: string;
	err: string;
}

function admin(args: string[], input = ''): Promise<Said> {
	return new Promise((resolve, reject) => {
		const command = ['--import', 'tsx', join(projectFolder, 'src/commands/admin.ts'), ...args];
		const child = spawn(process.execPath, command, {
			cwd: projectFolder,
			env: childEnv({ DATABASE_URL: db.url, TZ: 'Europe/Berlin' })
		});
		let out = '';
		let err = '';
		child.stdout.on('data', (chunk: Buffer) => (out += chunk.toString()));
		child.stderr.on('data', (chunk: Buffer) => (err += chunk.toString()));
		child.on('error', reject);
		child.on('close', (code) => resolve({ code, out, err }));
		child.stdin.end(input);
	});
}

describe("the operator's command", { timeout: 60_000 }, () => {
	test('explains itself without a database, each verb too', async () => {
		const all = await admin(['--help']);
		expect(all.code).toBe(0);
		for (const verb of ['add-workshop', 'add-person', 'set-password', 'add-winder', 'list']) {
			expect(all.out).toContain(verb);
		}
		expect((await admin(['add-winder', '--help'])).out).toContain('--time-scale');
	});

	test('adds a workshop in the time zone of the machine, and not twice', async () => {
		const first = await admin(['add-workshop', '--short-name', 'hollow', '--name', 'Hollow Lane workshop']);
		expect(first).toMatchObject({ code: 0, err: '' });
		const rows = await db.owner.selectFrom('workshop').select(['short_name', 'name', 'time_zone']).execute();
		expect(rows).toEqual([{ short_name: 'hollow', name: 'Hollow Lane workshop', time_zone: 'Europe/Berlin' }]);
		const second = await admin(['add-workshop', '--short-name', 'hollow', '--name', 'Other']);
		expect(second).toMatchObject({ code: 1, out: '' });
		expect(second.err).toContain('already');
	});

	test('adds a winder and prints its id and link key as one line', async () => {
		const said = await admin(['add-winder', '--workshop', 'hollow', '--name', 'w-07', '--ppr', '2', '--json']);
		expect(said).toMatchObject({ code: 0, err: '' });
		expect(said.out).toMatch(/^\{"winder":"[0-9a-f-]{36}","linkKey":"[A-Za-z0-9_-]{43}"\}\n$/);
		const { winder, linkKey } = JSON.parse(said.out) as { winder: string; linkKey: string };
		expect(await findLinkKey(db.app, linkKey)).toMatchObject({ winderId: winder });
		const row = await db.owner.selectFrom('winder').selectAll().where('id', '=', winder).executeTakeFirstOrThrow();
		expect(row).toMatchObject({
			name: 'w-07',
			pulses_per_turn: 2,
			rpm_max: 2000,
			sees_direction: false,
			time_scale: 1
		});
		expect(JSON.stringify(row)).not.toContain(linkKey);
	});

	test.each([
		[['--workshop', 'hollow', '--name', 'w-07'], 'already'],
		[['--workshop', 'nowhere', '--name', 'w-08'], 'There are: hollow'],
		[
			['--workshop', 'hollow', '--name', 'w-08', '--ppr', '0'],
			'--ppr must be a whole number from 1 to 1000, but "0" came'
		],
		[['--workshop', 'hollow', '--name', 'w-08', '--ppr', '1.5'], '--ppr must be a whole number'],
		[['--workshop', 'hollow'], '--name is missing'],
		[['--workshop', 'hollow', '--name', 'w-08', '--colour', 'red'], '--colour']
	])('refuses add-winder %j in plain words', async (args, says) => {
		const said = await admin(['add-winder', ...args]);
		expect(said).toMatchObject({ code: 1, out: '' });
		expect(said.err).toContain(says);
		expect(said.err).not.toContain('    at ');
		const names = await db.owner.selectFrom('winder').select('name').execute();
		expect(names).toEqual([{ name: 'w-07' }]);
	});

	test('adds a person with a link for the first password', async () => {
		const args = ['--workshop', 'hollow', '--email', 'Ada@Hollow.example', '--name', 'Ada Quill', '--role', 'owner'];
		const said = await admin(['add-person', ...args, '--url', 'https://bench.example/', '--json']);
		expect(said).toMatchObject({ code: 0, err: '' });
		const { link } = JSON.parse(said.out) as { link: string };
		expect(link).toMatch(/^https:\/\/bench\.example\/first-password\/[A-Za-z0-9_-]{43}$/);
		const row = await db.owner.selectFrom('member').selectAll().executeTakeFirstOrThrow();
		expect(row).toMatchObject({ email: 'ada@hollow.example', role: 'owner', password_hash: null });
	});

	test('sets a password from standard input, and ends the sessions of the old one', async () => {
		const before = await db.owner.selectFrom('member').selectAll().executeTakeFirstOrThrow();
		const said = await admin(['set-password', '--email', 'ada@hollow.example'], 'seven quiet copper mornings\n');
		expect(said).toMatchObject({ code: 0, err: '' });
		const row = await db.owner.selectFrom('member').selectAll().executeTakeFirstOrThrow();
		expect(await verifyPassword(row.password_hash, 'seven quiet copper mornings')).toBe(true);
		expect(row.session_epoch).toBeGreaterThan(before.session_epoch);
	});

	test('refuses a short password and leaves the old one', async () => {
		const said = await admin(['set-password', '--email', 'ada@hollow.example'], 'short\n');
		expect(said.code).toBe(1);
		expect(said.err).toContain('at least 15 characters');
		const row = await db.owner.selectFrom('member').selectAll().executeTakeFirstOrThrow();
		expect(await verifyPassword(row.password_hash, 'seven quiet copper mornings')).toBe(true);
	});

	test('lists the people and winders of a workshop, and no secret', async () => {
		const said = await admin(['list', '--workshop', 'hollow']);
		expect(said.out).toContain('ada@hollow.example');
		expect(said.out).toContain('w-07');
		expect((await admin(['list', '--workshop', 'hollow', '--json'])).out).not.toMatch(/"\w*hash"|"link_?key"/i);
	});
});
