import { spawn } from 'node:child_process';
import { writeFileSync, mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, describe, expect, test } from 'vitest';
import { childEnv } from '../lib/server/env.ts';
import { projectFolder } from './data-folder.ts';

const folder = mkdtempSync(join(tmpdir(), 'turnstead-start-'));
afterAll(() => rmSync(folder, { recursive: true, force: true }));
const noCertificate = join(folder, 'note.pem');
writeFileSync(noCertificate, 'buy wire\n');

/** What `npm start` says before it touches anything of this clone. */
function start(env: Record<string, string>): Promise<{ code: number | null; said: string }> {
	return new Promise((resolve, reject) => {
		const child = spawn(process.execPath, ['--import', 'tsx', join(projectFolder, 'src/commands/start.ts')], {
			cwd: projectFolder,
			env: childEnv(env),
			stdio: ['ignore', 'pipe', 'pipe']
		});
		let said = '';
		child.stdout.on('data', (chunk: Buffer) => (said += chunk.toString()));
		child.stderr.on('data', (chunk: Buffer) => (said += chunk.toString()));
		child.on('error', reject);
		child.on('close', (code) => resolve({ code, said }));
	});
}

describe('a start that cannot succeed says why in plain words', { timeout: 60_000 }, () => {
	test.each([
		['a port that is none', { PORT: '70000' }, 'PORT must be a port number from 1 to 65535, but "70000" came'],
		['a certificate without its key', { TLS_CERT: noCertificate }, 'TLS_CERT is set, but TLS_KEY is not'],
		[
			'a file that is not there',
			{ TLS_CERT: '/none.crt', TLS_KEY: '/none.key' },
			'TLS_CERT names /none.crt, which cannot be read'
		],
		[
			'a file that is no certificate',
			{ TLS_CERT: noCertificate, TLS_KEY: noCertificate },
			'holds no certificate in PEM form'
		],
		[
			'a database address that is none',
			{ DATABASE_URL: 'localhost' },
			'DATABASE_URL must be the address of a PostgreSQL database'
		]
	])('%s', async (_what, env, says) => {
		const { code, said } = await start(env);
		expect(code).toBe(1);
		expect(said).toContain(says);
		expect(said).not.toMatch(/^ {4}at /m);
	});
});
