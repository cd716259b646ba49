import { spawn, type ChildProcess } from 'node:child_process';
import { randomBytes } from 'node:crypto';
import { existsSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { createServer } from 'node:net';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { createInterface } from 'node:readline';
import { installPackages } from '../../src/commands/cluster.ts';
import { projectFolder } from '../../src/commands/data-folder.ts';
import { sleep } from '../../src/commands/processes.ts';
import { childEnv } from '../../src/lib/server/env.ts';

/** A program that was started to be measured, in a process of its own. */
export interface Program {
	port: number;
	/** What it holds after collecting garbage; only of one started with `askMemory`. */
	memory(): Promise<Memory>;
	/** SIGTERM; how long it took to be gone, and with which exit code. */
	stop(): Promise<{ ms: number; code: number | null }>;
}

export interface Memory {
	/** The heap in use and what stands outside it but belongs to it. */
	heapBytes: number;
	rssBytes: number;
}

interface StartOptions {
	env?: Record<string, string>;
	/** Answers `memory()`. */
	askMemory?: boolean;
	/** A folder for a profile of what it spends its time on. */
	profileFolder?: string | null;
}

const probe = join(projectFolder, 'tests', 'bench', 'probe.js');
const startMsMax = 20_000;

// A measurement that breaks off, or is broken off, leaves nothing running.
const running = new Set<ChildProcess>();
process.on('exit', () => {
	for (const child of running) child.kill('SIGKILL');
});
for (const signal of ['SIGINT', 'SIGTERM'] as const) process.once(signal, () => process.exit(130));

/** Its exit code once it is gone. */
function watchOver(child: ChildProcess): Promise<number | null> {
	running.add(child);
	return new Promise((resolve) =>
		child.once('exit', (code) => {
			running.delete(child);
			resolve(code);
		})
	);
}

/** The built server on a database. */
export function startServer(databaseUrl: string, options: StartOptions = {}): Promise<Program> {
	const env = { DATABASE_URL: databaseUrl, AUTH_SECRET: randomBytes(32).toString('base64url'), NODE_ENV: 'production' };
	const file = join(projectFolder, 'src', 'entry.js');
	return startNode([file, '--port', '0'], /^Turnstead listens on \S+:(\d+)$/, { ...options, env });
}

/** The bare relay. */
export function startRelay(options: StartOptions = {}): Promise<Program> {
	return startNode([join(projectFolder, 'tests', 'bench', 'relay.js')], /^port (\d+)$/, options);
}

async function startNode(args: string[], says: RegExp, options: StartOptions): Promise<Program> {
	const { askMemory = false, profileFolder = null, env = {} } = options;
	const nodeArgs = [
		...(askMemory ? ['--expose-gc'] : []),
		'--import',
		probe,
		...(profileFolder === null ? [] : ['--cpu-prof', '--cpu-prof-dir', profileFolder])
	];
	const child = spawn(process.execPath, [...nodeArgs, ...args], {
		cwd: projectFolder,
		env: childEnv(env),
		stdio: ['ignore', 'pipe', 'inherit', 'ipc']
	});
	const exited = watchOver(child);
	const lines = createInterface({ input: child.stdout as NonNullable<ChildProcess['stdout']> });
	const listening = new Promise<number>((resolve) => {
		lines.on('line', (line) => {
			const found = says.exec(line);
			if (found) resolve(Number(found[1]));
		});
	});
	const late = new AbortController();
	const port = await Promise.race([
		listening,
		exited.then((code) => Promise.reject(new Error(`${args[0]} ended with ${code} before it listened`))),
		sleep(startMsMax).then(() => (late.signal.aborted ? 0 : Promise.reject(new Error(`${args[0]} does not listen`))))
	]);
	late.abort();
	return {
		port,
		memory() {
			if (!askMemory) throw new Error('It was not started to be asked.');
			return new Promise((resolve) => {
				child.once('message', (answer) => resolve(answer as Memory));
				child.send('memory');
			});
		},
		async stop() {
			const from = performance.now();
			if (child.exitCode === null && child.signalCode === null) child.kill('SIGTERM');
			const code = await exited;
			return { ms: performance.now() - from, code };
		}
	};
}

/** Debian's MQTT broker on loopback, nothing of it kept on disk; or why there is none. */
export async function startBroker(): Promise<Program | { why: string }> {
	const isRoot = process.getuid?.() === 0;
	const binary = '/usr/sbin/mosquitto';
	if (!existsSync(binary)) {
		if (!isRoot) return { why: 'mosquitto is not installed, and only root can: apt-get install mosquitto' };
		try {
			await installPackages(['mosquitto']);
		} catch (error) {
			return { why: `mosquitto could not be installed: ${(error as Error).message.split('\n')[0]}` };
		}
	}
	const port = await freePort();
	const folder = mkdtempSync(join(tmpdir(), 'turnstead-bench-'));
	const config = join(folder, 'mosquitto.conf');
	// Without Nagle's wait, as the other two; and as many messages under way as the fastest round has.
	const lines = [`listener ${port} 127.0.0.1`, 'allow_anonymous true', 'persistence false', 'set_tcp_nodelay true'];
	writeFileSync(config, [...lines, ...(isRoot ? ['user root'] : []), 'log_type error', ''].join('\n'));
	const child = spawn(binary, ['-c', config], { stdio: ['ignore', 'ignore', 'inherit'] });
	const exited = watchOver(child);
	child.once('error', () => {});
	const stop = async () => {
		const from = performance.now();
		if (child.exitCode === null && child.signalCode === null) child.kill('SIGTERM');
		const code = await exited;
		rmSync(folder, { recursive: true, force: true });
		return { ms: performance.now() - from, code };
	};
	for (let tries = 0; tries < 50; tries += 1) {
		if (await answers(port)) return { port, memory: () => Promise.reject(new Error('It is no Node.')), stop };
		await sleep(100);
	}
	await stop();
	return { why: 'mosquitto was started, but does not listen' };
}

function freePort(): Promise<number> {
	return new Promise((resolve, reject) => {
		const server = createServer();
		server.once('error', reject);
		server.listen(0, '127.0.0.1', () => {
			const address = server.address();
			server.close(() => resolve(typeof address === 'object' && address ? address.port : 0));
		});
	});
}

async function answers(port: number): Promise<boolean> {
	const { connect } = await import('node:net');
	return new Promise((resolve) => {
		const socket = connect({ host: '127.0.0.1', port });
		socket.once('connect', () => {
			socket.destroy();
			resolve(true);
		});
		socket.once('error', () => resolve(false));
	});
}
