import type { IncomingMessage } from 'node:http';
import type { Duplex } from 'node:stream';
import type { Plugin } from 'vite';

/** The address of the winders' WebSocket. */
const LINK = '/api/v1/link';

interface App {
	upgrade(req: IncomingMessage, socket: Duplex, head: Buffer): void;
}

/**
 * Gives the development server what src/entry.js does in production: the WebSocket of the winders. Everything else that
 * wants an upgrade is Vite's own and left to it.
 */
export function linkUpgrade(): Plugin {
	return {
		name: 'turnstead-link',
		apply: 'serve',
		configureServer(server) {
			server.httpServer?.on('upgrade', (req: IncomingMessage, socket: Duplex, head: Buffer) => {
				if (new URL(req.url ?? '/', 'http://localhost').pathname !== LINK) return;
				socket.on('error', () => socket.destroy());
				// Made by the first request; the winder tries again.
				const app = Reflect.get(globalThis, Symbol.for('turnstead')) as App | undefined;
				if (app === undefined)
					socket.end('HTTP/1.1 503 Service Unavailable\r\nretry-after: 1\r\nconnection: close\r\n\r\n');
				else app.upgrade(req, socket, head);
			});
		}
	};
}
