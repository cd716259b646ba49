import { spawn, type ChildProcess } from 'node:child_process';
import { existsSync, mkdtempSync, readFileSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { parseArgs } from 'node:util';
import { childEnv } from '../lib/server/env.ts';
import { ensureBuilt } from './build.ts';
import { findBinaries, installPackages, throwawayCluster } from './cluster.ts';
import { projectFolder } from './data-folder.ts';
import { PlainError, sayAndFail } from './plain-error.ts';

/**
 * `npm test`: installs what it needs as root, runs every check and every test there is, and ends with one line that adds
 * up what really ran. `npm run soak` (`--soak`) runs the fault rounds alone, many more of them.
 */

interface Count {
	passed: number;
	failed: number;
}

interface Step {
	name: string;
	work(): Promise<Count>;
}

const CHROMIUM = '/usr/bin/chromium';
const bin = (name: string): string => join(projectFolder, 'node_modules', '.bin', name);

let current: ChildProcess | null = null;
let brokenOff = false;

/** Runs one tool and lets it print. Its group is its own, so that it can be ended with all it started. */
function tool(name: string, args: string[], env: Record<string, string> = {}): Promise<number> {
	return new Promise((resolve, reject) => {
		const child = spawn(bin(name), args, { cwd: projectFolder, stdio: 'inherit', env: childEnv(env), detached: true });
		current = child;
		child.on('error', reject);
		child.on('exit', (code) => {
			current = null;
			// Broken off: the next step must not begin while what was started is taken away.
			if (!brokenOff) resolve(code ?? 1);
		});
	});
}

/** A tool that says yes or no counts as one check. */
async function check(...commands: [string, ...string[]][]): Promise<Count> {
	for (const [name, ...args] of commands) {
		if ((await tool(name, args)) !== 0) return { passed: 0, failed: 1 };
	}
	return { passed: 1, failed: 0 };
}

interface VitestReport {
	numPassedTests: number;
	numFailedTests: number;
	numPendingTests: number;
	numTodoTests: number;
}

async function vitest(project: string, reports: string, env: Record<string, string>): Promise<Count> {
	const file = join(reports, `${project}.json`);
	const output = ['--reporter=default', '--reporter=json', `--outputFile.json=${file}`];
	const code = await tool('vitest', ['run', '--project', project, ...output], env);
	if (!existsSync(file)) return nothingRan(project);
	const report = JSON.parse(readFileSync(file, 'utf8')) as VitestReport;
	const skipped = report.numPendingTests + report.numTodoTests;
	return judged(project, code, report.numPassedTests, report.numFailedTests, skipped);
}

interface PlaywrightReport {
	stats: { expected: number; unexpected: number; flaky: number; skipped: number };
}

async function playwright(reports: string, env: Record<string, string>): Promise<Count> {
	const file = join(reports, 'browser.json');
	const code = await tool('playwright', ['test', '--reporter=list,json'], {
		...env,
		PLAYWRIGHT_JSON_OUTPUT_FILE: file
	});
	if (!existsSync(file)) return nothingRan('browser');
	const { stats } = JSON.parse(readFileSync(file, 'utf8')) as PlaywrightReport;
	return judged('browser', code, stats.expected, stats.unexpected + stats.flaky, stats.skipped);
}

/** A test that was skipped proves nothing, and a file that did not load holds tests that did not run. */
function judged(name: string, code: number, passed: number, failed: number, skipped: number): Count {
	if (skipped > 0) console.error(`${name}: ${skipped} skipped, which counts as failed.`);
	if (passed + failed + skipped === 0) return nothingRan(name);
	const unseen = code !== 0 && failed + skipped === 0 ? 1 : 0;
	if (unseen > 0) console.error(`${name}: ended with ${code} although every test passed, which counts as one failed.`);
	return { passed, failed: failed + skipped + unseen };
}

function nothingRan(name: string): Count {
	console.error(`${name}: no test ran, which counts as one failed.`);
	return { passed: 0, failed: 1 };
}

async function build(): Promise<Count> {
	try {
		console.log((await ensureBuilt()) === 'built' ? 'built' : 'built before, nothing changed since');
		return { passed: 1, failed: 0 };
	} catch (error) {
		console.error(error instanceof PlainError ? error.message : error);
		return { passed: 0, failed: 1 };
	}
}

/** What the tests need from Debian: PostgreSQL, a browser, cables without boards, what the computation is checked against, compilers. */
const packages: { name: string; there: () => boolean }[] = [
	{ name: 'postgresql', there: () => existsSync('/usr/lib/postgresql') },
	{ name: 'chromium', there: () => existsSync(CHROMIUM) },
	{ name: 'units', there: () => existsSync('/usr/bin/units') },
	{ name: 'socat', there: () => existsSync('/usr/bin/socat') },
	{ name: 'ngspice', there: () => existsSync('/usr/bin/ngspice') },
	{ name: 'python3-uncertainties', there: () => existsSync('/usr/lib/python3/dist-packages/uncertainties') },
	// The C core is compiled for this machine at 64 and 32 bits, by two compilers, and for an 8-bit board, which is simulated.
	{ name: 'gcc', there: () => existsSync('/usr/bin/gcc') },
	{ name: 'libc6-dev', there: () => existsSync('/usr/include/stdlib.h') },
	{ name: 'gcc-multilib', there: () => existsSync('/usr/share/doc/gcc-multilib') },
	{ name: 'clang', there: () => existsSync('/usr/bin/clang') },
	{ name: 'libclang-rt-dev', there: () => existsSync('/usr/share/doc/libclang-rt-dev') },
	{ name: 'gcc-avr', there: () => existsSync('/usr/bin/avr-gcc') },
	{ name: 'avr-libc', there: () => existsSync('/usr/lib/avr/include/avr/io.h') },
	{ name: 'simavr', there: () => existsSync('/usr/bin/simavr') }
];

async function ensurePackages(): Promise<void> {
	const missing = packages.filter(({ there }) => !there()).map(({ name }) => name);
	if (process.getuid?.() !== 0) {
		if (missing.length === 0) return;
		throw new PlainError(
			`The tests need packages that only root can install. Nothing ran.\n  sudo apt-get install ${missing.join(' ')}`
		);
	}
	// PostgreSQL has its own way in, which keeps Debian from starting a second server.
	await findBinaries();
	const others = missing.filter((name) => name !== 'postgresql');
	if (others.length > 0) await installPackages(others);
}

async function main(soak: boolean): Promise<Count> {
	await ensurePackages();
	const reports = mkdtempSync(join(tmpdir(), 'turnstead-reports-'));
	const cluster = await throwawayCluster();
	const clean = async (): Promise<void> => {
		await cluster.remove();
		rmSync(reports, { recursive: true, force: true });
	};
	for (const signal of ['SIGINT', 'SIGTERM'] as const) {
		process.on(signal, () => {
			if (brokenOff) return;
			brokenOff = true;
			if (current?.pid !== undefined) process.kill(-current.pid, 'SIGTERM');
			void clean().finally(() => process.exit(130));
		});
	}
	const env: Record<string, string> = { TEST_DATABASE_URL: cluster.url };
	const faults: Step = {
		name: soak ? 'Faults, many rounds' : 'Faults',
		work: () => vitest('faults', reports, soak ? { ...env, SOAK: '1' } : env)
	};
	const firmware: Step = {
		name: soak ? 'Firmware, long fuzz' : 'Firmware',
		work: () => vitest('firmware', reports, soak ? { ...env, SOAK: '1' } : env)
	};
	const steps: Step[] = soak
		? [firmware, { name: 'Build', work: build }, faults]
		: [
				{ name: 'Format', work: () => check(['prettier', '--check', '.']) },
				{ name: 'Lint', work: () => check(['eslint', '.']) },
				{
					name: 'Types',
					work: () =>
						check(['svelte-kit', 'sync'], ['svelte-check', '--tsconfig', './tsconfig.json', '--fail-on-warnings'])
				},
				{ name: 'Unit tests', work: () => vitest('unit', reports, env) },
				{ name: 'Reference programs', work: () => vitest('reference', reports, env) },
				firmware,
				{ name: 'Database tests', work: () => vitest('database', reports, env) },
				{ name: 'Build', work: build },
				faults,
				{ name: 'Browser tests', work: () => playwright(reports, env) }
			];

	const total: Count = { passed: 0, failed: 0 };
	const summary: string[] = [];
	try {
		for (const { name, work } of steps) {
			console.log(`\n── ${name}`);
			const began = performance.now();
			const { passed, failed } = await work();
			total.passed += passed;
			total.failed += failed;
			const took = ((performance.now() - began) / 1000).toFixed(1);
			summary.push(
				`${name.padEnd(20)} ${String(passed).padStart(5)} passed ${String(failed).padStart(4)} failed  ${took} s`
			);
		}
	} finally {
		await clean();
	}
	console.log(`\n${summary.join('\n')}\n`);
	return total;
}

const { values } = parseArgs({ options: { soak: { type: 'boolean', default: false } } });
try {
	const { passed, failed } = await main(values.soak);
	console.log(`${passed} passed, ${failed} failed`);
	process.exit(failed === 0 && passed > 0 ? 0 : 1);
} catch (error) {
	sayAndFail(error);
}
