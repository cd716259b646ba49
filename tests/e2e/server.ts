import { spawn, type ChildProcess } from 'node:child_process';
import { randomBytes } from 'node:crypto';
import { join } from 'node:path';
import { createInterface } from 'node:readline';
import { projectFolder } from '../../src/commands/data-folder.ts';
import { newPassword } from '../../src/commands/demo.ts';
import { hashPassword } from '../../src/lib/server/auth/passwords.ts';
import { insertMemberWithPassword, insertWorkshop } from '../../src/lib/server/db/admin.ts';
import { addCoil, type CoilInput } from '../../src/lib/server/db/coils.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import type { Role } from '../../src/lib/server/db/schema.ts';
import { addWinder, newLinkKey, type WinderSettings } from '../../src/lib/server/db/winders.ts';
import { childEnv, testEnv } from '../../src/lib/server/env.ts';
import { copyOf, type TestDatabase } from '../db/harness.ts';

/** The built program as a process of its own, on a database of its own: it can be killed and started again. */

export interface Person {
	name: string;
	email: string;
	password: string;
	role: Role;
}

export interface Workshop {
	id: string;
	shortName: string;
	owner: Person;
	maker: Person;
	apprentice: Person;
}

export interface TestWinder {
	id: string;
	name: string;
	linkKey: string;
}

export interface TestServer {
	url: string;
	port: number;
	database: TestDatabase;
	/** A workshop with an owner, a maker and an apprentice. */
	workshop: Workshop;
	/** What the server printed since it was first started. */
	output(): string;
	pid(): number;
	/** kill -9: nothing is written, nothing is said. Returns once the process is gone. */
	kill(): Promise<void>;
	/** SIGTERM; the exit code once it is gone. */
	stop(): Promise<number | null>;
	/** Starts it again on the same port, after kill or stop. */
	start(): Promise<void>;
	/** Adds another workshop with its three people. */
	addWorkshop(shortName: string): Promise<Workshop>;
	/** A winder with a link key; `timeScale` says how much faster than a real one it runs. */
	addWinder(settings?: Partial<WinderSettings>, workshop?: Workshop): Promise<TestWinder>;
	/** Puts coils in the queue as if they had always been there; a server that runs hears of it with its next coil. */
	addCoil(coil: Partial<CoilInput> & { name: string; target: number }, workshop?: Workshop): Promise<string>;
	/** Stops everything and drops the database. */
	remove(): Promise<void>;
}

export interface ServerOptions {
	/** Names beside this machine's own that browsers may use. */
	allowedHosts?: string[];
	host?: string;
	/** More of the environment; read at each start. */
	env?: Record<string, string>;
	/** Where to make the database; the cluster of the test run unless given. */
	cluster?: { url: string; template: string };
}

/** A fresh database with one workshop, and the built server on it, listening on a free port. */
export async function startServer(options: ServerOptions = {}): Promise<TestServer> {
	const { databaseUrl, template } = testEnv();
	const cluster = options.cluster ?? { url: databaseUrl ?? '', template: template ?? '' };
	const database = await copyOf(cluster.url, cluster.template);
	const authSecret = randomBytes(32).toString('base64url');
	const host = options.host ?? '127.0.0.1';
	let printed = '';
	let port = 0;
	let child: ChildProcess;
	let exited: Promise<number | null> = Promise.resolve(null);

	const start = async (): Promise<void> => {
		const args = [join(projectFolder, 'src', 'entry.js'), '--host', host, '--port', String(port)];
		for (const name of options.allowedHosts ?? []) args.push('--allow-host', name);
		child = spawn(process.execPath, args, {
			env: childEnv({ DATABASE_URL: database.url, AUTH_SECRET: authSecret, NODE_ENV: 'production', ...options.env }),
			stdio: ['ignore', 'pipe', 'pipe']
		});
		exited = new Promise((resolve) => child.once('exit', (code) => resolve(code)));
		child.stderr?.on('data', (chunk: Buffer) => (printed += chunk.toString()));
		const lines = createInterface({ input: child.stdout! });
		const listening = new Promise<number>((resolve) => {
			lines.on('line', (line) => {
				printed += `${line}\n`;
				const found = /^Turnstead listens on \S+:(\d+)$/.exec(line);
				if (found) resolve(Number(found[1]));
			});
		});
		const first = await Promise.race([listening, exited.then((code) => ({ code }))]);
		if (typeof first !== 'number') throw new Error(`the server ended with ${first.code}:\n${printed}`);
		port = first;
	};

	const end = async (signal: 'SIGKILL' | 'SIGTERM'): Promise<number | null> => {
		if (child.exitCode === null && child.signalCode === null) child.kill(signal);
		return exited;
	};

	const newWorkshop = async (shortName: string): Promise<Workshop> => {
		const id = await insertWorkshop(database.owner, { shortName, name: `Workshop ${shortName}`, timeZone: 'UTC' });
		const add = async (name: string, role: Role): Promise<Person> => {
			const email = `${name.split(' ')[0]?.toLowerCase()}@${shortName}.example`;
			const password = newPassword();
			const passwordHash = await hashPassword(password);
			await insertMemberWithPassword(database.owner, id, { name, email, role, passwordHash });
			return { name, email, password, role };
		};
		return {
			id,
			shortName,
			owner: await add('Ada Quill', 'owner'),
			maker: await add('Tom Fenn', 'maker'),
			apprentice: await add('Ira Moss', 'apprentice')
		};
	};

	let workshop: Workshop;
	try {
		workshop = await newWorkshop('hollow');
		await start();
	} catch (error) {
		await database.drop();
		throw error;
	}

	return {
		get url() {
			return `http://127.0.0.1:${port}`;
		},
		get port() {
			return port;
		},
		database,
		workshop,
		output: () => printed,
		pid: () => child.pid ?? 0,
		start,
		kill: async () => void (await end('SIGKILL')),
		stop: () => end('SIGTERM'),
		addWorkshop: newWorkshop,
		addWinder: (settings = {}, of = workshop) =>
			inWorkshop(database.owner, of.id, async (trx) => {
				const added = await addWinder(trx, of.id, {
					name: 'w-01',
					pulsesPerTurn: 1,
					rpmMax: 2000,
					seesDirection: true,
					forwardIs: 'counter-clockwise',
					easeEarlyTurns: 40,
					stopEarlyTurns: 3,
					keepAfterS: null,
					...settings
				});
				if (!added.ok) throw new Error(`no winder was added: ${added.why}`);
				const linkKey = await newLinkKey(trx, of.id, added.winder.id);
				if (linkKey === null) throw new Error('the winder just added is not there');
				return { id: added.winder.id, name: added.winder.name, linkKey };
			}),
		addCoil: (coil, of = workshop) =>
			inWorkshop(database.owner, of.id, async (trx) => {
				const input: CoilInput = {
					note: '',
					lookEvery: 500,
					direction: 'counter-clockwise',
					topFaces: 'out',
					toleranceTurns: 5,
					...coil
				};
				return (await addCoil(trx, of.id, input, { createdBy: null })).id;
			}),
		remove: async () => {
			await end('SIGTERM');
			await database.drop();
		}
	};
}
