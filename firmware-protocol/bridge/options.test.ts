import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { readCommand, type Command } from './options.ts';

const key = 'a-link-key-of-some-length';
const environment = { linkKey: key, stateHome: '/home/ada/state' };
let folder: string;
beforeAll(() => (folder = mkdtempSync(join(tmpdir(), 'turnstead-options-'))));
afterAll(() => rmSync(folder, { recursive: true }));

function read(args: string, from = environment as Parameters<typeof readCommand>[1]): Command {
	const found = readCommand(args.split(' '), from);
	if (!found.ok || !('command' in found)) throw new Error(found.ok ? 'help' : found.says);
	return found.command;
}
const says = (args: string, from = environment as Parameters<typeof readCommand>[1]): string => {
	const found = readCommand(args.split(' ').filter(Boolean), from);
	return found.ok ? '' : found.says;
};

describe('the command line of the bridge', () => {
	it('takes each address that stands on a winder’s page', () => {
		const port = '--port /dev/ttyACM0 --server';
		expect(read(`${port} https://bench.example`)).toMatchObject({ carrier: 'ws', winder: null });
		expect(read(`${port} https://bench.example --winder w --carrier http`)).toMatchObject({
			carrier: 'http',
			winder: 'w'
		});
		const lines = read(`${port} http://127.0.0.1:4173/api/v1/winders/7f/lines`);
		expect(lines).toMatchObject({ carrier: 'http', winder: '7f' });
		expect(lines.server.href).toBe('http://127.0.0.1:4173/');
		const link = read(`${port} wss://bench.example/api/v1/link`);
		expect(link).toMatchObject({ carrier: 'ws', winder: null });
		expect(link.server.href).toBe('https://bench.example/');
		expect(read(`${port} http://127.0.0.1:4173/api/v1/winders/7f/lines --carrier ws`).carrier).toBe('ws');
	});

	it('keeps the lines of each winder in a folder of its own', () => {
		expect(read('--port /dev/ttyACM0 --server http://localhost:1 --winder 7f').folder).toBe(
			'/home/ada/state/turnstead-bridge/7f'
		);
		expect(read('--port /dev/serial/by-id/x --server http://localhost:1').folder).toBe(
			'/home/ada/state/turnstead-bridge/serial-by-id-x'
		);
		const service = { linkKey: key, stateDirectory: '/var/lib/turnstead-bridge' };
		expect(read('--port /dev/x --server http://localhost:1 --winder ../../etc', service).folder).toBe(
			'/var/lib/turnstead-bridge/..-..-etc'
		);
	});

	it('takes the key from environment, file or command line, and says who can read the last', () => {
		const start = '--port /dev/x --server http://localhost:1';
		const file = join(folder, 'key');
		writeFileSync(file, 'another-key-of-some-length\n');
		expect(read(start)).toMatchObject({ linkKey: key, warnings: [] });
		expect(read(`${start} --key-file ${file}`)).toMatchObject({ linkKey: 'another-key-of-some-length', warnings: [] });
		const shown = read(`${start} --key visible-to-everyone`, {});
		expect(shown.linkKey).toBe('visible-to-everyone');
		expect(shown.warnings.join()).toContain('everybody on this computer can read it');
		expect(shown.warnings.join()).not.toContain('visible-to-everyone');
	});

	it('warns of a key that goes over plain http through a network', () => {
		expect(read('--port /dev/x --server http://bench.local:4173').warnings.join()).toContain('plain http');
		expect(read('--port /dev/x --server https://bench.local:4173').warnings).toEqual([]);
	});

	it('says what is missing or wrong', () => {
		expect(says('--server http://localhost:1')).toContain('--port');
		expect(says('--port /dev/x')).toContain('--server');
		expect(says('--port /dev/x --server ftp://a')).toContain('http://');
		expect(says('--port /dev/x --server http://localhost:1/other')).toContain('neither');
		expect(says('--port /dev/x --server http://localhost:1 --carrier http')).toContain('--winder');
		expect(says('--port /dev/x --server http://localhost:1 --carrier mail')).toContain('ws or http');
		expect(says('--port /dev/x --server http://localhost:1', {})).toContain('link key is missing');
		expect(says('--port /dev/x --server http://localhost:1 --key-file /nowhere/key')).toContain('cannot be read');
		expect(says('--port /dev/x --server http://localhost:1 --spool-max 0')).toContain('1 to');
		expect(says('--port /dev/x --server https://bench.example --insecure-tls')).toContain('on this computer');
		expect(says('--port /dev/x --server http://localhost:1 --what')).toContain('--help');
	});
});
