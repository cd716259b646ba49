import { existsSync, readFileSync } from 'node:fs';
import http from 'node:http';
import https from 'node:https';
import { networkInterfaces, hostname } from 'node:os';
import { dirname, join } from 'node:path';
import { fileURLToPath, pathToFileURL } from 'node:url';
import { parseArgs } from 'node:util';

/**
 * The HTTP server around the built program: one port for pages, lines and the WebSocket of the winders.
 *
 * SvelteKit has no WebSocket route, and its own server waits out its whole shutdown time while one stream is open. This one
 * asks the program to close its links and streams first. Everything it needs comes as arguments:
 *
 *   node src/entry.js --port 4173 [--host 127.0.0.1] [--tls-cert file --tls-key file] [--allow-host name]… [--trust-proxy]
 *
 * DATABASE_URL and AUTH_SECRET are read by the program itself. `npm start` calls `serve` in its own process.
 */

/**
 * @typedef {object} Settings
 * @property {string} host
 * @property {number} port 0 takes any free one
 * @property {string | null} [tlsCert] path of a PEM file
 * @property {string | null} [tlsKey] path of a PEM file
 * @property {string[]} [allowedHosts] names beside this machine's own
 * @property {boolean} [trustProxy] believe X-Forwarded-Proto and X-Forwarded-For
 *
 * @typedef {object} Served
 * @property {string} url where this machine reaches it
 * @property {number} port
 * @property {() => Promise<Unsaved | null>} stop refuses what is new, closes links, writes the last batch, closes streams,
 *   then all else; what could not be written, null for nothing
 *
 * @typedef {object} App what the built program leaves on globalThis
 * @property {(req: http.IncomingMessage, socket: import('node:stream').Duplex, head: Buffer) => void} upgrade
 * @property {() => Promise<Unsaved | null>} stop
 *
 * @typedef {{ lines: number }} Unsaved
 */

const BUILD = join(dirname(fileURLToPath(import.meta.url)), '..', 'build');
const PROTOCOL_HEADER = 'x-turnstead-protocol';
/** Requests that are being answered get this long to end after the streams were closed. */
const LAST_REQUESTS_MS = 400;

/** @param {Settings} settings @returns {Promise<Served>} */
export async function serve(settings) {
	const secure = Boolean(settings.tlsCert && settings.tlsKey);
	configureHandler(settings);
	const { handler } = await import(pathToFileURL(join(BUILD, 'handler.js')).href);
	const app = /** @type {App} */ (Reflect.get(globalThis, Symbol.for('turnstead')));
	if (!app) throw new Error('the build made no program: hooks.server.ts has not run');

	const ours = hostNames(settings);
	let stopping = false;

	/** @param {http.IncomingMessage} req @param {http.ServerResponse} res */
	const answer = (req, res) => {
		// For files too, which no hook sees.
		res.setHeader('x-content-type-options', 'nosniff');
		res.setHeader('referrer-policy', 'same-origin');
		if (stopping) {
			res.setHeader('retry-after', '2');
			return refuse(req, res, 503, 'Turnstead is stopping. Nothing of this request was taken; send it again.');
		}
		const why = refusedHost(req.headers.host, ours);
		if (why !== null) return refuse(req, res, why.status, why.text);
		nameProtocol(req, secure, settings.trustProxy ?? false);
		handler(req, res, () => refuse(req, res, 404, 'There is nothing here.'));
	};

	const server = secure
		? https.createServer(
				{ cert: readFileSync(String(settings.tlsCert)), key: readFileSync(String(settings.tlsKey)) },
				answer
			)
		: http.createServer(answer);

	server.on('upgrade', (req, socket, head) => {
		socket.on('error', () => socket.destroy());
		const why = stopping ? { status: 503, text: 'Turnstead is stopping.' } : refusedHost(req.headers.host, ours);
		if (why !== null) {
			const text = `${why.text}\n`;
			const status = `HTTP/1.1 ${why.status} ${http.STATUS_CODES[why.status]}`;
			const head = `content-type: text/plain; charset=utf-8\r\ncontent-length: ${Buffer.byteLength(text)}\r\nconnection: close`;
			socket.end(`${status}\r\n${head}\r\n\r\n${text}`);
			return;
		}
		nameProtocol(req, secure, settings.trustProxy ?? false);
		app.upgrade(req, socket, head);
	});

	await listen(server, settings);
	const address = server.address();
	const port = typeof address === 'object' && address ? address.port : settings.port;

	/** @type {Promise<Unsaved | null> | undefined} */
	let stopped;
	const stop = async () => {
		stopping = true;
		const closed = new Promise((resolve) => server.close(() => resolve(undefined)));
		try {
			return await app.stop();
		} finally {
			server.closeIdleConnections();
			const last = setTimeout(() => server.closeAllConnections(), LAST_REQUESTS_MS);
			await closed;
			clearTimeout(last);
		}
	};
	return { url: urlOf(settings.host, port, secure), port, stop: () => (stopped ??= stop()) };
}

/**
 * What was not on disk at the stop, and where it is.
 * @param {Unsaved} unsaved
 */
export function notSavedText({ lines }) {
	const what = lines === 0 ? 'The last totals or taps' : lines === 1 ? 'One line' : `${lines} lines`;
	return (
		`Not everything is on disk: the database took no more. ${what} could not be saved. ` +
		'None of it was acknowledged: winders and screens keep theirs and send it again.'
	);
}

/**
 * The address under which this machine reaches a server that listens on `host`.
 * @param {string} host @param {number} port @param {boolean} secure
 */
export function urlOf(host, port, secure) {
	const reachable =
		host === '0.0.0.0' ? '127.0.0.1' : host === '::' ? '[::1]' : host.includes(':') ? `[${host}]` : host;
	return `${secure ? 'https' : 'http'}://${reachable}:${port}`;
}

/**
 * The adapter's handler takes these from the environment when it is loaded. ORIGIN stays unset: one fixed origin would
 * refuse every form from a tablet on the local network.
 * @param {Settings} settings
 */
function configureHandler(settings) {
	for (const name of ['ORIGIN', 'HOST_HEADER', 'PORT_HEADER', 'ADDRESS_HEADER', 'XFF_DEPTH', 'BODY_SIZE_LIMIT']) {
		delete process.env[name];
	}
	process.env.NODE_ENV ??= 'production';
	process.env.PROTOCOL_HEADER = PROTOCOL_HEADER;
	// Never absent behind a proxy that is trusted: nameProtocol sees to it.
	if (settings.trustProxy) process.env.ADDRESS_HEADER = 'x-forwarded-for';
}

/**
 * Writes what the handler reads as the protocol, over anything a client sent under that name.
 * @param {http.IncomingMessage} req @param {boolean} secure @param {boolean} trustProxy
 */
function nameProtocol(req, secure, trustProxy) {
	const forwarded = trustProxy
		? String(req.headers['x-forwarded-proto'] ?? '')
				.split(',')[0]
				?.trim()
		: '';
	req.headers[PROTOCOL_HEADER] = forwarded === 'https' || forwarded === 'http' ? forwarded : secure ? 'https' : 'http';
	if (trustProxy) req.headers['x-forwarded-for'] ??= req.socket.remoteAddress ?? '';
}

/**
 * The names a browser may know this machine by. A page elsewhere can point a name of its own at this address
 * (DNS rebinding) and would then be "same origin"; its name is not among these.
 * @param {Settings} settings @returns {() => Set<string>}
 */
function hostNames(settings) {
	const fixed = ['localhost', '127.0.0.1', '[::1]', settings.host, ...(settings.allowedHosts ?? [])];
	// Read again for each unknown name: a laptop changes its address with the network it is in.
	return () => {
		const own = hostname().toLowerCase();
		const addresses = Object.values(networkInterfaces())
			.flat()
			.flatMap((entry) => (entry ? [entry.family === 'IPv6' ? `[${entry.address}]` : entry.address] : []));
		return new Set([...fixed, own, `${own.split('.')[0]}.local`, ...addresses].map((name) => name.toLowerCase()));
	};
}

/**
 * @param {string | undefined} header @param {() => Set<string>} ours
 * @returns {{ status: number, text: string } | null}
 */
function refusedHost(header, ours) {
	if (header === undefined || header === '') {
		return { status: 400, text: 'A request without a Host header says nothing about where it wants to go.' };
	}
	const name = header.replace(/:\d*$/, '').replace(/\.$/, '').toLowerCase();
	if (name === 'localhost' || name === '127.0.0.1' || ours().has(name)) return null;
	const shown = /^[a-z0-9.:[\]-]{1,100}$/.test(name) ? name : 'that name';
	return {
		status: 421,
		text: `This server does not answer to ${shown}. If it should, start it with ALLOWED_HOSTS=${shown}.`
	};
}

/**
 * Plain text, and to programs a problem (RFC 9457) like every refusal of the API.
 * @param {http.IncomingMessage} req @param {http.ServerResponse} res @param {number} status @param {string} text
 */
function refuse(req, res, status, text) {
	if (res.headersSent) return void res.end();
	const api = req.url?.startsWith('/api/') ?? false;
	const problem = { type: 'about:blank', title: http.STATUS_CODES[status], status, detail: text };
	res.writeHead(status, {
		'content-type': api ? 'application/problem+json' : 'text/plain; charset=utf-8',
		connection: 'close'
	});
	res.end(api ? JSON.stringify(problem) : `${text}\n`);
}

/** @param {http.Server | https.Server} server @param {Settings} settings @returns {Promise<void>} */
function listen(server, settings) {
	return new Promise((resolve, reject) => {
		server.once('error', reject);
		server.listen({ host: settings.host, port: settings.port }, () => {
			server.off('error', reject);
			resolve();
		});
	});
}

async function main() {
	const { values } = parseArgs({
		options: {
			host: { type: 'string', default: '127.0.0.1' },
			port: { type: 'string', default: '4173' },
			'tls-cert': { type: 'string' },
			'tls-key': { type: 'string' },
			'allow-host': { type: 'string', multiple: true, default: [] },
			'trust-proxy': { type: 'boolean', default: false }
		}
	});
	if (!existsSync(join(BUILD, 'handler.js'))) {
		console.error('There is no build yet: run "npm run build" first, or start everything with "npm start".');
		process.exit(1);
	}
	const served = await serve({
		host: values.host,
		port: Number(values.port),
		tlsCert: values['tls-cert'] ?? null,
		tlsKey: values['tls-key'] ?? null,
		allowedHosts: values['allow-host'],
		trustProxy: values['trust-proxy']
	});
	console.log(`Turnstead listens on ${served.url}`);

	let asked = false;
	for (const signal of /** @type {const} */ (['SIGINT', 'SIGTERM'])) {
		process.on(signal, () => {
			if (asked) process.exit(130);
			asked = true;
			served.stop().then(
				(unsaved) => {
					if (unsaved) console.error(notSavedText(unsaved));
					process.exit(unsaved ? 1 : 0);
				},
				(error) => {
					console.error(error);
					process.exit(1);
				}
			);
		});
	}
}

if (process.argv[1] !== undefined && import.meta.url === pathToFileURL(process.argv[1]).href) {
	main().catch((error) => {
		console.error(error instanceof Error && error.name === 'EnvError' ? error.message : error);
		process.exit(1);
	});
}
