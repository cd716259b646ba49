import { randomBytes } from 'node:crypto';
import type { Kysely } from 'kysely';
import { throwawayCluster } from '../../src/commands/cluster.ts';
import { createDatabase, dropDatabase } from '../../src/lib/server/db/admin.ts';
import { connect } from '../../src/lib/server/db/connect.ts';
import { migrate } from '../../src/lib/server/db/migrate.ts';
import type { Database } from '../../src/lib/server/db/schema.ts';
import { testEnv } from '../../src/lib/server/env.ts';

export interface TestDatabase {
	/** Signs in as the owner. */
	url: string;
	/** The owner: sees every workshop. For making rows and looking at what is stored. */
	owner: Kysely<Database>;
	/** What the program uses: works as turnstead_app, under the policies. */
	app: Kysely<Database>;
	drop(): Promise<void>;
}

/** A database of its own for one test file: `const db = await freshDatabase()` in beforeAll, `db.drop()` in afterAll. */
export async function freshDatabase(): Promise<TestDatabase> {
	const { inject } = await import('vitest');
	return copyOf(inject('clusterUrl'), inject('template'));
}

/** The same where vitest does not run: in a browser test or a measurement. */
export async function copyOf(clusterUrl: string, template: string): Promise<TestDatabase> {
	const name = `turnstead_${randomBytes(6).toString('hex')}`;
	await inCluster(clusterUrl, (db) => createDatabase(db, name, template));
	const url = withDatabase(clusterUrl, name);
	const owner = connect(url, { max: 3, onLost: () => {} });
	const app = connect(url, { role: 'turnstead_app', max: 10, onLost: () => {} });
	return {
		url,
		owner,
		app,
		async drop() {
			await Promise.all([owner.destroy(), app.destroy()]);
			await inCluster(clusterUrl, (db) => dropDatabase(db, name));
		}
	};
}

export interface TestCluster {
	url: string;
	template: string;
	/** Takes away what was made; a cluster that was given stays. */
	remove(): Promise<void>;
}

/** The cluster that was given, or one of our own, with a migrated database in it. */
export async function testCluster(): Promise<TestCluster> {
	const given = testEnv().databaseUrl;
	const own = given === null ? await throwawayCluster() : null;
	const url = given ?? own?.url ?? '';
	try {
		const template = await makeTemplate(url);
		return { url, template, remove: () => own?.remove() ?? dropTemplate(url, template) };
	} catch (error) {
		await own?.remove();
		throw error;
	}
}

/** A migrated, empty database that nobody is connected to. */
export async function makeTemplate(clusterUrl: string): Promise<string> {
	const name = `turnstead_template_${randomBytes(6).toString('hex')}`;
	await inCluster(clusterUrl, (db) => createDatabase(db, name));
	const db = connect(withDatabase(clusterUrl, name), { max: 1 });
	try {
		const migrated = await migrate(db);
		if (!migrated.ok) throw new Error(migrated.why);
	} finally {
		await db.destroy();
	}
	return name;
}

export async function dropTemplate(clusterUrl: string, template: string): Promise<void> {
	await inCluster(clusterUrl, (db) => dropDatabase(db, template));
}

function withDatabase(url: string, name: string): string {
	const changed = new URL(url);
	changed.pathname = `/${name}`;
	return changed.href;
}

// Two copies of one template at the same moment refuse each other ("source database is being accessed by other users").
const TEMPLATE_BUSY = '55006';
const TRIES_MAX = 100;

async function inCluster(url: string, work: (db: Kysely<Database>) => Promise<void>): Promise<void> {
	const db = connect(url, { max: 1, onLost: () => {} });
	try {
		for (let tries = 1; ; tries++) {
			try {
				return await work(db);
			} catch (error) {
				if ((error as { code?: string }).code !== TEMPLATE_BUSY || tries === TRIES_MAX) throw error;
				await new Promise((resolve) => setTimeout(resolve, 50));
			}
		}
	} finally {
		await db.destroy();
	}
}
