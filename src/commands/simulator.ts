import { spawn, type ChildProcess } from 'node:child_process';
import { join } from 'node:path';
import { childEnv } from '../lib/server/env.ts';
import { projectFolder } from './data-folder.ts';
import type { DemoWinder } from './demo.ts';
import { until } from './processes.ts';

/** A simulator that was asked to end says good-bye to the server, which then need not wait for more than this. */
const GOODBYE_MS_MAX = 300;

export interface Simulator {
	pid: number;
	stop(): Promise<void>;
}

/** Starts the simulated winder of the demo workshop. Its link key goes by the environment, where no process list shows it. */
export function startSimulator(url: string, winder: DemoWinder, onEnd: (code: number | null) => void): Simulator {
	const main = join(projectFolder, 'simulator', 'main.ts');
	const args = ['--import', 'tsx', main, '--server', url, '--winder', winder.id, '--name', winder.name];
	args.push('--scenario', 'workshop', '--quiet', '--with-parent');
	// Its totals go on where they were at the last stop, so that a coil half wound needs no question.
	args.push('--memory', join(projectFolder, '.data', 'demo-winder-memory.json'));
	// The certificate is for the name of the shop, not for the address by which this machine reaches itself.
	if (/^https:\/\/(127\.|localhost|\[::1\])/.test(url)) args.push('--insecure-tls');
	const child: ChildProcess = spawn(process.execPath, args, {
		cwd: projectFolder,
		stdio: ['ignore', 'ignore', 'inherit'],
		env: childEnv({ TURNSTEAD_LINK_KEY: winder.linkKey }),
		// A session of its own: Ctrl-C reaches it through this process, after the screens were told.
		detached: true
	});
	let stopping = false;
	let ended = false;
	child.on('exit', (code) => {
		ended = true;
		if (!stopping) onEnd(code);
	});
	child.on('error', () => {
		ended = true;
		if (!stopping) onEnd(null);
	});
	return {
		pid: child.pid ?? 0,
		async stop() {
			stopping = true;
			if (ended) return;
			child.kill('SIGTERM');
			if (!(await until(() => ended, GOODBYE_MS_MAX, 20))) child.kill('SIGKILL');
		}
	};
}
