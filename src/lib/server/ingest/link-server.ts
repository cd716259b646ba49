import type { IncomingMessage } from 'node:http';
import type { Duplex } from 'node:stream';
import { WebSocketServer, type WebSocket } from 'ws';
import {
	formatLine,
	holdMsMax,
	linksPerWinderMax,
	messageBytesMax,
	messageLinesMax,
	pingSeconds,
	subprotocol
} from '../../turnline/index.ts';
import { Acknowledger } from './acknowledger.ts';
import type { IngestCore } from './ingest.ts';
import { bearerOf, type LinkKeys } from './keys.ts';
import type { SeatLink } from './seat.ts';
import type { WinderRef } from './types.ts';

export const linkPath = '/api/v1/link';
/** A winder that reads nothing must not fill the memory with what it is told. */
const unreadBytesMax = 256 * 1024;
/** Messages that wait for their turn on one link, and messages sent against HOLD in a row. */
const waitingMax = 200;
const againstHoldMax = 100;
const holdWhenNotSavedMs = 2_000;

const closeCodes = { binary: 1003, policy: 1008, tooBig: 1009, restart: 1012, overload: 1013 } as const;

export interface LinkServer {
	/** Answers an HTTP upgrade: a link, or a refusal and the end of the socket. */
	upgrade(request: IncomingMessage, socket: Duplex, head: Buffer): void;
	/** Asks every winder on a socket to come back: the server restarts. */
	close(): Promise<void>;
}

/** The WebSocket carrier: `turnline.1` text messages of 1 to 50 lines. */
export function createLinkServer(ingest: IngestCore, keys: LinkKeys): LinkServer {
	const sockets = new WebSocketServer({
		noServer: true,
		maxPayload: messageBytesMax,
		perMessageDeflate: false,
		handleProtocols: (offered) => (offered.has(subprotocol) ? subprotocol : false)
	});
	const alive = new WeakSet<WebSocket>();
	const keyOf = new WeakMap<WebSocket, string>();
	let closing = false;

	const ping = setInterval(() => {
		for (const socket of sockets.clients) {
			if (!alive.has(socket)) {
				socket.terminate();
				continue;
			}
			alive.delete(socket);
			socket.ping();
			const linkKey = keyOf.get(socket);
			if (linkKey === undefined) continue;
			// The operator's command may have revoked it beside this server.
			keys.find(linkKey).then(
				(ref) => ref ?? socket.close(closeCodes.policy, 'link key no longer valid'),
				() => {}
			);
		}
	}, pingSeconds * 1000);
	ping.unref();

	async function admit(request: IncomingMessage, socket: Duplex, head: Buffer): Promise<void> {
		const url = new URL(request.url ?? '/', 'http://winder.invalid');
		if (url.pathname !== linkPath) return refuse(socket, 404, 'Not Found');
		if (closing) return refuse(socket, 503, 'Service Unavailable');
		const offered = (request.headers['sec-websocket-protocol'] ?? '').split(',').map((name) => name.trim());
		if (!offered.includes(subprotocol)) {
			return refuse(socket, 400, 'Bad Request', `This link speaks the subprotocol ${subprotocol}.`);
		}
		const linkKey = bearerOf(request.headers.authorization);
		const ticket = url.searchParams.get('ticket');
		let ref: WinderRef | null = null;
		try {
			if (linkKey !== null) ref = await keys.find(linkKey);
			else if (ticket !== null) ref = keys.takeTicket(ticket);
		} catch {
			return refuse(socket, 503, 'Service Unavailable', 'The key cannot be looked up just now. Try again.');
		}
		if (!ref) return refuse(socket, 401, 'Unauthorized', 'Send the link key of a winder, or an unused ticket.');
		const winder = ref;
		if (socket.destroyed) return;
		sockets.handleUpgrade(request, socket, head, (opened) => {
			if (linkKey !== null) keyOf.set(opened, linkKey);
			void serve(opened, winder, linkKey !== null);
		});
	}

	async function serve(socket: WebSocket, ref: WinderRef, byKey: boolean): Promise<void> {
		alive.add(socket);
		socket.on('pong', () => alive.add(socket));
		socket.on('error', () => socket.terminate());

		const send = (lines: string[]) => {
			if (socket.readyState !== socket.OPEN || lines.length === 0) return;
			if (socket.bufferedAmount > unreadBytesMax) return socket.terminate();
			socket.send(lines.join('\n') + '\n');
		};
		const link: SeatLink = { send, close: (code, reason) => socket.close(code, reason), byKey };

		const acknowledger = new Acknowledger(send, () => socket.readyState === socket.OPEN);
		let againstHold = 0;
		const hold = (ms: number) => {
			againstHold += 1;
			if (againstHold > againstHoldMax) socket.close(closeCodes.overload, 'too many lines');
			else send([formatLine({ verb: 'HOLD', ms: Math.min(ms, holdMsMax) })]);
		};

		const take = async (text: string) => {
			if (socket.readyState !== socket.OPEN) return;
			const lines = text.split('\n');
			if (lines.at(-1) === '') lines.pop();
			if (lines.length > messageLinesMax) {
				socket.close(closeCodes.tooBig, `more than ${messageLinesMax} lines in a message`);
				return;
			}
			const step = await ingest.takeIn(ref, lines, 'ws', Date.now());
			if (step.ok) {
				againstHold = 0;
				acknowledger.taken(step.taken);
				return;
			}
			switch (step.why) {
				case 'not-found':
					return socket.close(closeCodes.policy, 'no such winder');
				case 'rate':
					return hold(step.retryAfterS * 1000);
				case 'not-saved':
					return hold(holdWhenNotSavedMs);
				case 'nothing-parsed':
				case 'too-many-lines':
					// Counted for the winder's page; the gap in its numbers makes it send them again.
					return;
			}
		};

		// In the order they came, also while the winder is being read from disk.
		let turn: Promise<void> = Promise.resolve();
		let waiting = 0;
		socket.on('message', (data, isBinary) => {
			if (isBinary) return socket.close(closeCodes.binary, 'text only');
			if (waiting >= waitingMax) return socket.close(closeCodes.overload, 'too many messages');
			waiting += 1;
			const text = data.toString();
			turn = turn
				.then(() => take(text))
				.catch((error) => {
					console.error('a link could not be served:', error);
					socket.close(closeCodes.overload, 'try again');
				})
				.finally(() => (waiting -= 1));
		});

		let detach = () => {};
		let gone = false;
		socket.on('close', () => {
			gone = true;
			detach();
		});
		try {
			const attached = await ingest.attach(ref, link);
			if (!attached.ok) {
				const full = attached.why === 'full';
				socket.close(
					full ? closeCodes.overload : closeCodes.policy,
					full ? `${linksPerWinderMax} links already` : 'no such winder'
				);
				return;
			}
			detach = attached.detach;
			if (gone) detach();
		} catch (error) {
			console.error('a link could not be opened:', error);
			socket.close(closeCodes.overload, 'try again');
		}
	}

	return {
		upgrade(request, socket, head) {
			socket.on('error', () => socket.destroy());
			admit(request, socket, head).catch((error) => {
				console.error('an upgrade failed:', error);
				socket.destroy();
			});
		},
		async close() {
			closing = true;
			clearInterval(ping);
			const open = [...sockets.clients];
			for (const socket of open) socket.close(closeCodes.restart, 'restart');
			// A winder that does not answer the close is not waited for.
			const closed = Promise.all(open.map((socket) => new Promise((resolve) => socket.once('close', resolve))));
			await Promise.race([closed, new Promise((resolve) => setTimeout(resolve, 200))]);
			for (const socket of open) socket.terminate();
			sockets.close();
		}
	};
}

function refuse(socket: Duplex, status: number, title: string, detail = title): void {
	const body = JSON.stringify({ type: 'about:blank', title, status, detail });
	socket.end(
		`HTTP/1.1 ${status} ${title}\r\ncontent-type: application/problem+json\r\n` +
			`content-length: ${Buffer.byteLength(body)}\r\nconnection: close\r\n\r\n${body}`
	);
}
