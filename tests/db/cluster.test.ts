import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { sql } from 'kysely';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { throwawayCluster, type Cluster } from '../../src/commands/cluster.ts';
import { until } from '../../src/commands/processes.ts';
import { connect } from '../../src/lib/server/db/connect.ts';

let cluster: Cluster & { remove(): Promise<void> };
beforeAll(async () => {
	cluster = await throwawayCluster();
}, 60_000);
afterAll(() => cluster.remove(), 60_000);

const WAIT_MS = 30_000;

async function count(): Promise<number> {
	const db = connect(cluster.url, { max: 1, onLost: () => {} });
	try {
		await sql`create table if not exists mark (at timestamptz)`.execute(db);
		await sql`insert into mark values (now())`.execute(db);
		const { rows } = await sql<{ n: number }>`select count(*) as n from mark`.execute(db);
		return rows[0]?.n ?? 0;
	} finally {
		await db.destroy();
	}
}

function killed(): number {
	const pid = cluster.pid();
	if (pid === null) throw new Error('no database runs');
	process.kill(pid, 'SIGKILL');
	return pid;
}

describe('a database of our own', { timeout: 60_000 }, () => {
	test('is adopted where it runs already', async () => {
		const pid = cluster.pid();
		expect(await count()).toBe(1);
		await cluster.start();
		expect(cluster.pid()).toBe(pid);
		expect(await count()).toBe(2);
	});

	test('comes back with what was committed after a kill', async () => {
		killed();
		expect(await until(() => cluster.pid() === null, WAIT_MS)).toBe(true);
		await cluster.start();
		expect(await count()).toBe(3);
	});

	test('comes back when the number in its pid file belongs to another process by now', async () => {
		const file = join(cluster.dataFolder, 'postmaster.pid');
		const pid = killed();
		expect(await until(() => cluster.pid() === null, WAIT_MS)).toBe(true);
		writeFileSync(file, readFileSync(file, 'utf8').replace(String(pid), String(process.pid)));
		await cluster.start();
		expect(cluster.pid()).not.toBe(process.pid);
		expect(await count()).toBe(4);
	});

	test('stops in order, and stopping it again changes nothing', async () => {
		await cluster.stop();
		expect(cluster.pid()).toBeNull();
		await cluster.stop();
		await cluster.start();
		expect(await count()).toBe(5);
	});

	test('signs in nobody without the password', async () => {
		const open = new URL(cluster.url);
		open.password = 'wrong';
		const db = connect(open.href, { max: 1 });
		await expect(sql`select 1`.execute(db)).rejects.toThrow(/password/);
		await db.destroy();
	});
});
