import { spawn, type ChildProcess } from 'node:child_process';
import { join } from 'node:path';
import { projectFolder } from '../../src/commands/data-folder.ts';
import { childEnv } from '../../src/lib/server/env.ts';
import type { BridgeState } from '../../firmware-protocol/bridge/bridge.ts';

/** The bridge as a process of its own: it can be killed and started again. */
export interface BridgeProcess {
	start(): Promise<void>;
	/** kill -9. */
	kill(): Promise<void>;
	/** SIGTERM; the exit code once it is gone. */
	stop(): Promise<number | null>;
	/** What it says of itself; null while it does not run. */
	state(): Promise<BridgeState | null>;
	/** What it printed since it was first started. */
	output(): string;
}

export function bridgeProcess(args: string[], linkKey: string): BridgeProcess {
	let child: ChildProcess | null = null;
	let exited: Promise<number | null> = Promise.resolve(null);
	let printed = '';
	let statusUrl: string | null = null;

	const end = async (signal: 'SIGKILL' | 'SIGTERM') => {
		statusUrl = null;
		child?.kill(signal);
		const code = await exited;
		child = null;
		return code;
	};
	return {
		async start() {
			const main = join(projectFolder, 'firmware-protocol', 'bridge', 'main.ts');
			const started = spawn(process.execPath, ['--import', 'tsx', main, '--status', '0', ...args], {
				cwd: projectFolder,
				env: childEnv({ TURNSTEAD_LINK_KEY: linkKey }),
				stdio: ['ignore', 'pipe', 'pipe']
			});
			child = started;
			exited = new Promise((resolve) => started.once('exit', (code) => resolve(code)));
			const ready = new Promise<string>((resolve) => {
				const take = (chunk: Buffer) => {
					printed += chunk.toString();
					const found = [...printed.matchAll(/^Status at (\S+)\n/gm)].at(-1);
					if (found && chunk.includes('Status at')) resolve(found[1]!);
				};
				started.stdout.on('data', take);
				started.stderr.on('data', take);
			});
			const first = await Promise.race([ready, exited.then((code) => ({ code }))]);
			if (typeof first !== 'string') throw new Error(`the bridge ended with ${first.code}:\n${printed}`);
			statusUrl = first;
		},
		kill: async () => void (await end('SIGKILL')),
		stop: () => end('SIGTERM'),
		async state() {
			if (statusUrl === null) return null;
			const answer = await fetch(`${statusUrl}/status`).catch(() => null);
			return answer ? ((await answer.json()) as BridgeState) : null;
		},
		output: () => printed
	};
}
