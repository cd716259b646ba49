import { X509Certificate, createPrivateKey } from 'node:crypto';
import { readFileSync } from 'node:fs';
import { createServer } from 'node:net';
import { networkInterfaces } from 'node:os';
import { createSecureContext } from 'node:tls';
import { parseArgs } from 'node:util';
import { notSavedText, serve, urlOf } from '../entry.js';
import { provideServerEnv, startEnv, type StartEnv } from '../lib/server/env.ts';
import { ensureBuilt, isBuilt } from './build.ts';
import { projectCluster, type Cluster } from './cluster.ts';
import { authSecret, ensureDataFolder, leavePlace, notePlace, projectFolder, takePlace } from './data-folder.ts';
import { asOwner, migrateOrSay } from './database.ts';
import { demoSignIns, demoWinder, ensureDemo } from './demo.ts';
import { PlainError, codeOf, sayAndFail } from './plain-error.ts';
import { sleep, startTicks } from './processes.ts';
import { startSimulator, type Simulator } from './simulator.ts';

/**
 * `npm start`: database, migrations, demo workshop, build, server, simulated winder, in this one process where it can be.
 * `npm run dev` (`--dev`) is the same with Vite's development server in place of the build.
 */

interface Served {
	url: string;
	/** What could not be saved, null for nothing. */
	stop(): Promise<{ lines: number } | null>;
}

/** One press of Ctrl-C reaches this process twice, from the terminal and from npm; a second press comes later than this. */
const SAME_PRESS_MS = 1_000;
/** How often a database of our own is looked after. */
const DATABASE_LOOK_MS = 2_000;
/** The first answer may wait for the database to recover. */
const HEALTHY_MS_MAX = 60_000;

/** What was started, undone in reverse order. */
const undo: (() => Promise<void> | void)[] = [];
let stopping: Promise<void> | undefined;
/** What the server said as it stopped. 'unknown': it could not say. */
let unsaved: { lines: number } | null | 'unknown' = null;
let stopAskedAt = 0;
let placeUrl: string | null = null;

function stopAll(): Promise<void> {
	stopping ??= (async () => {
		if (placeUrl !== null) notePlace({ url: placeUrl, stopping: true, simulator: null });
		for (const step of undo.splice(0).reverse()) {
			try {
				await step();
			} catch (error) {
				process.exitCode = 1;
				console.error(error instanceof PlainError ? error.message : error);
			}
		}
	})();
	return stopping;
}

function onSignal(): void {
	const now = performance.now();
	if (stopping !== undefined) {
		if (now - stopAskedAt < SAME_PRESS_MS) return;
		console.error(
			'\nEnded at once. What was acknowledged is on disk; a database left running is found again by the next start.'
		);
		process.exit(130);
	}
	stopAskedAt = now;
	console.log('\nStopping …');
	void stopAll().then(() => {
		const stopped = `Stopped in ${((performance.now() - now) / 1000).toFixed(1)} s.`;
		if (unsaved === null) console.log(`${stopped} Everything is on disk.`);
		else {
			process.exitCode = 1;
			console.error(
				unsaved === 'unknown'
					? `${stopped} The last batch may not be on disk; what was acknowledged is.`
					: `${stopped} ${notSavedText(unsaved)}`
			);
		}
		process.exit();
	});
}

async function start(dev: boolean): Promise<void> {
	const settings = startEnv();
	const url = urlOf(settings.host, settings.port, settings.tlsCert !== null);
	checkTls(settings);
	ensureDataFolder();
	await takePlace(url);
	placeUrl = url;
	undo.push(leavePlace);
	process.on('SIGINT', onSignal);
	process.on('SIGTERM', onSignal);
	if (!ignoresHangup()) process.on('SIGHUP', onSignal);
	await checkPort(settings);

	if (!dev && !isBuilt()) console.log('Building; this takes half a minute the first time …');
	const notes: string[] = [];
	// Building takes the longest and needs no database. Vite's reader is one more process; it ends by itself.
	const noMore = new AbortController();
	const building = dev ? Promise.resolve('kept' as const) : ensureBuilt(noMore.signal);
	building.catch(() => {});
	undo.push(() => noMore.abort());

	const databaseUrl = settings.databaseUrl ?? (await startDatabase(notes));
	provideServerEnv({ databaseUrl, authSecret: settings.authSecret ?? authSecret() });
	let signIns: string[] | null = null;
	await asOwner(databaseUrl, async (db) => {
		const migrations = await migrateOrSay(db);
		if (migrations.length > 0) notes.push(`migrations  ${migrations.join(', ')}`);
		if ((await ensureDemo(db)) === 'made')
			notes.push('workshop    demo, "Hollow Lane workshop", with a coil to practise on');
		signIns = await demoSignIns(db);
	});

	if (!dev) notes.push((await building) === 'built' ? 'build       made' : 'build       as it was: nothing changed');
	if (stopping !== undefined) return;
	const served = dev ? await serveDev(settings) : await serveBuild(settings);
	undo.push(async () => {
		unsaved = 'unknown';
		unsaved = await served.stop();
	});
	await untilHealthy(url);

	const simulator = settings.simulator ? playWinder(url) : null;
	notePlace({ url, stopping: false, simulator: simulator && { pid: simulator.pid, ticks: startTicks(simulator.pid) } });
	if (simulator !== null) notes.push('winder      w-01, simulated (SIMULATOR=off in a shop that has one)');
	announce(settings, notes, signIns, process.uptime());
}

async function startDatabase(notes: string[]): Promise<string> {
	const cluster = await projectCluster(projectFolder);
	const how = cluster.made ? 'made and started' : cluster.adopted ? 'found running' : 'started';
	notes.push(`database    PostgreSQL, ${how}, data in ${cluster.dataFolder}`);
	if (cluster.note !== null) notes.push(`            ${cluster.note}`);
	const watch = setInterval(() => void lookAfter(cluster), DATABASE_LOOK_MS);
	undo.push(async () => {
		clearInterval(watch);
		await cluster.stop();
	});
	return cluster.url;
}

let restarting = false;

/** A database that was killed is started again; the program says "counting, not saving" until then. */
async function lookAfter(cluster: Cluster): Promise<void> {
	if (restarting || stopping !== undefined || cluster.pid() !== null) return;
	restarting = true;
	const before = cluster.url;
	try {
		console.error('The database has ended; starting it again.');
		await cluster.start();
		if (cluster.url !== before) throw new PlainError('The port of the database was taken meanwhile. Start again.');
	} catch (error) {
		console.error(error instanceof PlainError ? error.message : error);
		process.exitCode = 1;
		await stopAll();
		process.exit();
	} finally {
		restarting = false;
	}
}

async function serveBuild(settings: StartEnv): Promise<Served> {
	try {
		return await serve(settings);
	} catch (error) {
		throw listenError(settings, error);
	}
}

async function serveDev(settings: StartEnv): Promise<Served> {
	const { createServer: createVite } = await import('vite');
	const { tlsCert, tlsKey } = settings;
	const https = tlsCert && tlsKey ? { cert: readFileSync(tlsCert), key: readFileSync(tlsKey) } : undefined;
	const vite = await createVite({
		root: projectFolder,
		clearScreen: false,
		server: {
			host: settings.host,
			port: settings.port,
			strictPort: true,
			allowedHosts: settings.allowedHosts,
			...(https ? { https } : {})
		}
	});
	try {
		await vite.listen();
	} catch (error) {
		await vite.close();
		throw listenError(settings, error);
	}
	return {
		url: urlOf(settings.host, settings.port, https !== undefined),
		async stop() {
			const app = Reflect.get(globalThis, Symbol.for('turnstead')) as Pick<Served, 'stop'> | undefined;
			const left = (await app?.stop()) ?? null;
			(vite.httpServer as { closeAllConnections?(): void } | null)?.closeAllConnections?.();
			await vite.close();
			return left;
		}
	};
}

function checkTls({ tlsCert, tlsKey }: StartEnv): void {
	if (tlsCert === null || tlsKey === null) return;
	const read = (name: string, file: string): Buffer => {
		try {
			return readFileSync(file);
		} catch (error) {
			throw new PlainError(
				`${name} names ${file}, which cannot be read (${codeOf(error)}). Correct the path or its rights.`
			);
		}
	};
	const cert = read('TLS_CERT', tlsCert);
	const key = read('TLS_KEY', tlsKey);
	const parsed = <T>(name: string, file: string, what: string, parse: () => T): T => {
		try {
			return parse();
		} catch (error) {
			throw new PlainError(`${name} names ${file}, which holds no ${what} in PEM form (${(error as Error).message}).`);
		}
	};
	const certificate = parsed('TLS_CERT', tlsCert, 'certificate', () => new X509Certificate(cert));
	const privateKey = parsed('TLS_KEY', tlsKey, 'private key without a passphrase', () => createPrivateKey(key));
	if (!certificate.checkPrivateKey(privateKey)) {
		throw new PlainError(
			`The key in ${tlsKey} is not the one of the certificate in ${tlsCert}. Set TLS_CERT and TLS_KEY to a pair.`
		);
	}
	createSecureContext({ cert, key });
}

/** Before anything is started, so that a taken port costs a second and not a build. */
function checkPort(settings: StartEnv): Promise<void> {
	return new Promise((resolve, reject) => {
		const probe = createServer();
		probe.once('error', (error) => reject(listenError(settings, error)));
		probe.listen({ host: settings.host, port: settings.port }, () => probe.close(() => resolve()));
	});
}

function listenError({ host, port }: StartEnv, error: unknown): unknown {
	switch (codeOf(error)) {
		case 'EADDRINUSE':
			return new PlainError(
				`Port ${port} on ${host} is taken by another program. Nothing was started.\n` +
					`End that program, or choose another port:  PORT=${port + 1} npm start`
			);
		case 'EADDRNOTAVAIL':
		case 'ENOTFOUND':
			return new PlainError(`${host} is no address of this machine. Set HOST to one, such as 127.0.0.1 or 0.0.0.0.`);
		case 'EACCES':
			return new PlainError(
				`Port ${port} is reserved: only root may listen there. Choose one from 1024 up:  PORT=4173 npm start`
			);
		default:
			return error;
	}
}

async function untilHealthy(url: string): Promise<void> {
	const end = performance.now() + HEALTHY_MS_MAX;
	let why = 'no answer';
	while (performance.now() < end && stopping === undefined) {
		try {
			const [status, text] = await getHealth(url);
			if (status === 200) return;
			why = text;
		} catch (error) {
			why = (error as Error).message;
		}
		await sleep(100);
	}
	if (stopping === undefined) throw new PlainError(`The server runs, but is not well: ${why}`);
}

async function getHealth(url: string): Promise<[number, string]> {
	const secure = url.startsWith('https:');
	const { request } = secure ? await import('node:https') : await import('node:http');
	return new Promise((resolve, reject) => {
		// Our own server: its certificate may be for another name than the one this machine reaches it by.
		const asked = request(`${url}/healthz`, secure ? { rejectUnauthorized: false } : {}, (answer) => {
			let text = '';
			answer.on('data', (chunk: Buffer) => (text += chunk.toString()));
			answer.on('end', () => resolve([answer.statusCode ?? 0, text]));
		});
		asked.on('error', reject);
		asked.end();
	});
}

function playWinder(url: string): Simulator | null {
	const winder = demoWinder();
	if (winder === null) return null;
	const simulator = startSimulator(url, winder, (code) =>
		console.error(`The simulated winder has ended (${code ?? 'it could not be started'}). Everything else goes on.`)
	);
	undo.push(() => simulator.stop());
	return simulator;
}

function announce(settings: StartEnv, notes: string[], signIns: string[] | null, tookS: number): void {
	const secure = settings.tlsCert !== null;
	const lines = [
		'',
		`Turnstead is ready after ${tookS.toFixed(1)} s.`,
		'',
		...addresses(settings.host).map((host) => `  ${urlOf(host, settings.port, secure)}`),
		'',
		'Started:',
		...notes.map((note) => `  ${note}`)
	];
	if (signIns !== null) {
		lines.push(
			'',
			'Demo sign-ins (kept in .data/demo-sign-ins.txt, readable only by you):',
			...signIns.map((row) => `  ${row}`)
		);
	}
	lines.push('', 'Ctrl-C stops it.', '');
	console.log(lines.join('\n'));
}

/** The addresses by which it can be reached, this machine's own first. */
function addresses(host: string): string[] {
	if (host !== '0.0.0.0' && host !== '::') return [host];
	const others = Object.values(networkInterfaces())
		.flat()
		.flatMap((entry) => (entry && !entry.internal && entry.family === 'IPv4' ? [entry.address] : []));
	return ['127.0.0.1', ...others];
}

/** Under nohup a closed terminal must not stop it; listening would undo that. */
function ignoresHangup(): boolean {
	const ignored = /^SigIgn:\s*([0-9a-f]+)/m.exec(readFileSync('/proc/self/status', 'utf8'))?.[1] ?? '0';
	return (BigInt(`0x${ignored}`) & 1n) === 1n;
}

const { values } = parseArgs({ options: { dev: { type: 'boolean', default: false } } });
try {
	await start(values.dev);
} catch (error) {
	await stopAll();
	sayAndFail(error);
}
