import http from 'node:http';
import { expect, test } from './fixtures.ts';
import { startServer, type TestServer } from './server.ts';

interface Answer {
	status: number;
	headers: http.IncomingHttpHeaders;
	text: string;
}

/** A request as it is written, with a Host of one's own, which a browser would not let through. */
function ask(server: TestServer, path: string, headers: Record<string, string> = {}, method = 'GET'): Promise<Answer> {
	return new Promise((resolve, reject) => {
		const asked = http.request(
			{ host: '127.0.0.1', port: server.port, path, headers, method, agent: false },
			(answer) => {
				let text = '';
				answer.on('data', (chunk: Buffer) => (text += chunk.toString()));
				answer.on('end', () => resolve({ status: answer.statusCode ?? 0, headers: answer.headers, text }));
			}
		);
		asked.on('error', reject);
		asked.end();
	});
}

test('health says ok when database and migrations are right', async ({ server }) => {
	const answer = await ask(server, '/healthz');
	expect(answer.status).toBe(200);
	expect(JSON.parse(answer.text)).toEqual({ status: 'ok' });
});

test('a page of another name that points at this address is refused', async ({ server }) => {
	const page = await ask(server, '/sign-in', { host: 'rebound.example' });
	expect(page.status).toBe(421);
	expect(page.text).toContain('ALLOWED_HOSTS=rebound.example');
	const api = await ask(server, '/api/v1/runs', { host: 'rebound.example' });
	expect(api.status).toBe(421);
	expect(api.headers['content-type']).toBe('application/problem+json');
	expect(JSON.parse(api.text)).toMatchObject({ status: 421 });
	for (const host of [`localhost:${server.port}`, `127.0.0.1:${server.port}`, 'LOCALHOST']) {
		expect((await ask(server, '/sign-in', { host })).status, host).toBe(200);
	}
});

test('an upgrade under another name is refused before the program sees it', async ({ server }) => {
	const status = await new Promise((resolve, reject) => {
		const asked = http.request({
			host: '127.0.0.1',
			port: server.port,
			path: '/api/v1/link',
			headers: {
				host: 'rebound.example',
				connection: 'Upgrade',
				upgrade: 'websocket',
				'sec-websocket-version': '13',
				'sec-websocket-key': 'AAAAAAAAAAAAAAAAAAAAAA=='
			}
		});
		asked.on('response', (answer) => resolve(answer.statusCode));
		asked.on('upgrade', () => reject(new Error('it was upgraded')));
		asked.on('error', reject);
		asked.end();
	});
	expect(status).toBe(421);
});

test('a name the workshop allows is answered', async () => {
	const server = await startServer({ allowedHosts: ['bench.example'] });
	try {
		expect((await ask(server, '/sign-in', { host: 'Bench.Example' })).status).toBe(200);
		expect((await ask(server, '/sign-in', { host: 'other.example' })).status).toBe(421);
	} finally {
		await server.remove();
	}
});

test('what a client calls the protocol is not believed', async ({ server }) => {
	const answer = await ask(server, '/', { 'x-turnstead-protocol': 'https', 'x-forwarded-proto': 'https' });
	const strict = Object.keys(answer.headers).includes('strict-transport-security');
	expect(strict).toBe(false);
	expect(String(answer.headers['set-cookie'] ?? '')).not.toContain('Secure');
});

test('every file tells the browser not to guess its type', async ({ server }) => {
	const answer = await ask(server, '/favicon.svg');
	expect(answer.status).toBe(200);
	expect(answer.headers['x-content-type-options']).toBe('nosniff');
});

test('a stop with an open stream ends the stream, and then the server with 0', async ({ server }) => {
	const winder = await server.addWinder();
	const stream = await new Promise<http.IncomingMessage>((resolve, reject) => {
		const headers = { authorization: `Bearer ${winder.linkKey}`, accept: 'text/event-stream' };
		const path = `/api/v1/winders/${winder.id}/live`;
		http.get({ host: '127.0.0.1', port: server.port, path, headers, agent: false }, resolve).on('error', reject);
	});
	expect(stream.statusCode).toBe(200);
	expect(stream.headers['content-type']).toContain('text/event-stream');
	const ended = new Promise<void>((resolve) => stream.once('close', resolve));
	stream.resume();
	expect(await server.stop()).toBe(0);
	await ended;
});

test('a killed server comes back on the same port', async ({ server }) => {
	const { url } = server;
	await server.kill();
	await server.start();
	expect(server.url).toBe(url);
	expect((await ask(server, '/healthz')).status).toBe(200);
});
