import http from 'node:http';
import { afterEach, describe, expect, it } from 'vitest';
import type { BridgeState } from './bridge.ts';
import { serveStatus, statusText, type Status } from './status.ts';

const well: BridgeState = {
	port: {
		path: '/dev/ttyACM0',
		openAs: '/dev/ttyACM0',
		board: null,
		trouble: null,
		lines: 1_234,
		refused: 0,
		tooLong: 0,
		notAscii: 0,
		opened: 1
	},
	server: { linked: true, trouble: null, behind: 0 },
	spool: {
		lines: 0,
		bytes: 1024 * 1024,
		bytesMax: 256 * 1024 * 1024,
		keeping: 'yes',
		reason: null,
		ticksDropped: 0,
		spoilt: 0
	},
	boot: { b: '5C0E91A7', n: 1_234, e: 7 },
	refused: 0
};

let open: Status[] = [];
afterEach(async () => {
	await Promise.all(open.map((status) => status.close()));
	open = [];
});

async function serve(port = 0): Promise<string> {
	const status = await serveStatus(port, () => well);
	if (!status) throw new Error('no port was free');
	open.push(status);
	return status.url;
}

function ask(url: string, more: http.RequestOptions = {}): Promise<{ status: number; body: string }> {
	return new Promise((resolve, reject) => {
		const asked = http.request(url, { agent: false, ...more }, (answer) => {
			let body = '';
			answer.on('data', (part: Buffer) => (body += part.toString()));
			answer.on('end', () => resolve({ status: answer.statusCode ?? 0, body }));
		});
		asked.on('error', reject);
		asked.end();
	});
}

describe('how the bridge says it is', () => {
	it('is JSON for programs and one line for people', async () => {
		const url = await serve();
		expect(JSON.parse((await ask(`${url}/status`)).body)).toEqual(well);
		expect((await ask(url)).body).toBe(
			'Winder at /dev/ttyACM0, 1234 lines. Server linked. 0 lines kept, 1.0 of 256.0 MB. Boot 5C0E91A7: line 1234, event 7 kept.\n'
		);
		expect((await ask(`${url}/other`)).status).toBe(404);
	});

	it('is to read only, and not under another name', async () => {
		const url = await serve();
		expect((await ask(`${url}/status`, { method: 'POST' })).status).toBe(405);
		expect((await ask(`${url}/status`, { headers: { host: 'rebound.example' } })).status).toBe(421);
	});

	it('takes the next port where one is taken', async () => {
		const taken = Number(new URL(await serve()).port);
		const next = Number(new URL(await serve(taken)).port);
		expect(next).toBeGreaterThan(taken);
	});

	it('names what is wrong in the words that were told', () => {
		const trouble = { kind: 'missing' as const, text: '/dev/ttyACM0 is not there.' };
		const text = statusText({
			...well,
			port: { ...well.port, openAs: null, trouble },
			server: { linked: false, trouble: 'No link to bench.local.', behind: 0 },
			spool: { ...well.spool, keeping: 'full', ticksDropped: 5, lines: 9 },
			boot: null,
			refused: 2
		});
		expect(text).toBe(
			'/dev/ttyACM0 is not there. No link to bench.local. 9 lines kept, 1.0 of 256.0 MB. The spool is full: new lines are not kept. ' +
				'5 ticks given up for room. 2 lines refused by the server, in refused.txt.'
		);
	});
});
