import { createServer, type Server } from 'node:http';
import type { AddressInfo } from 'node:net';
import type { BridgeState } from './bridge.ts';

/** How the bridge is, for a person on this computer and for its service manager: on loopback, to read only. */

/** Where the port asked for is taken, one of the next few. */
const portsTriedMax = 20;

export interface Status {
	url: string;
	close(): Promise<void>;
}

/** null: no port was free. */
export async function serveStatus(port: number, state: () => BridgeState): Promise<Status | null> {
	const server = createServer((request, response) => {
		const send = (status: number, type: string, body: string) => {
			response.writeHead(status, {
				'content-type': type,
				'cache-control': 'no-store',
				'x-content-type-options': 'nosniff'
			});
			response.end(request.method === 'HEAD' ? '' : body);
		};
		// A page elsewhere can point a name of its own at this address.
		const name = (request.headers.host ?? '').replace(/:\d+$/, '');
		if (name !== '127.0.0.1' && name !== 'localhost') return send(421, 'text/plain', 'Not this name.\n');
		if (request.method !== 'GET' && request.method !== 'HEAD') return send(405, 'text/plain', 'To read only.\n');
		const path = new URL(request.url ?? '/', 'http://bridge.invalid').pathname;
		if (path === '/status') return send(200, 'application/json', `${JSON.stringify(state())}\n`);
		if (path === '/') return send(200, 'text/plain; charset=utf-8', `${statusText(state())}\n`);
		send(404, 'text/plain', 'There is / and /status.\n');
	});
	for (let tried = 0; tried < portsTriedMax; tried += 1) {
		const at = await listen(server, port === 0 ? 0 : port + tried);
		if (at === null) continue;
		return {
			url: `http://127.0.0.1:${at}`,
			close: () =>
				new Promise((resolve) => {
					server.close(() => resolve());
					server.closeAllConnections();
				})
		};
	}
	return null;
}

function listen(server: Server, port: number): Promise<number | null> {
	return new Promise((resolve, reject) => {
		const failed = (error: NodeJS.ErrnoException) =>
			error.code === 'EADDRINUSE' || error.code === 'EACCES' ? resolve(null) : reject(error);
		server.once('error', failed);
		server.listen({ host: '127.0.0.1', port }, () => {
			server.off('error', failed);
			resolve((server.address() as AddressInfo).port);
		});
	});
}

/** In one plain line. */
export function statusText({ port, server, spool, boot, refused }: BridgeState): string {
	const parts = [
		port.openAs === null
			? (port.trouble?.text ?? `${port.path} is not open.`)
			: (port.trouble?.text ?? `Winder at ${port.openAs}, ${port.lines} lines.`),
		server.linked
			? server.behind > 0
				? `Server linked, catching up (${server.behind} lines in the spool).`
				: 'Server linked.'
			: (server.trouble ?? 'No link to the server.'),
		`${spool.lines} lines kept, ${megabytes(spool.bytes)} of ${megabytes(spool.bytesMax)} MB.`
	];
	if (spool.keeping === 'full') parts.push('The spool is full: new lines are not kept.');
	if (spool.keeping === 'failing') parts.push(`The spool cannot be written (${spool.reason}): new lines are not kept.`);
	if (spool.ticksDropped > 0) parts.push(`${spool.ticksDropped} ticks given up for room.`);
	if (refused > 0) parts.push(`${refused} lines refused by the server, in refused.txt.`);
	if (boot) parts.push(`Boot ${boot.b}: line ${boot.n}, event ${boot.e} kept.`);
	return parts.join(' ');
}

const megabytes = (bytes: number) => (bytes / 1024 / 1024).toFixed(1);
