import type { IncomingMessage } from 'node:http';
import { WebSocketServer, type WebSocket } from 'ws';
import { messageBytesMax, messageLinesMax, pingSeconds, subprotocol } from '../../src/lib/turnline/index.ts';
import { Inbox, NoWinder, realClock, winderMsMax, type Carrier } from './carrier.ts';

/**
 * Listens where a winder is told that Turnstead is, and waits for it. It is the winder that opens a link; any link key will do.
 * Throws NoWinder when the address cannot be listened at, or no winder comes.
 */
export async function openWs(url: URL, tell: (text: string) => void): Promise<Carrier> {
	const inbox = new Inbox();
	let link: WebSocket | null = null;
	let clock = realClock();
	const server = new WebSocketServer({
		host: url.hostname.replace(/^\[|\]$/g, ''),
		port: Number(url.port || 80),
		path: url.pathname,
		maxPayload: messageBytesMax,
		perMessageDeflate: false,
		handleProtocols: (offered) => (offered.has(subprotocol) ? subprotocol : false),
		verifyClient({ req }: { req: IncomingMessage }, answer: (taken: boolean, status?: number, text?: string) => void) {
			const offered = String(req.headers['sec-websocket-protocol'] ?? '').split(/\s*,\s*/);
			if (offered.includes(subprotocol)) answer(true);
			else answer(false, 400, `This link speaks the subprotocol ${subprotocol}.`);
		}
	});
	await new Promise<void>((resolve, reject) => {
		server.once('listening', resolve);
		server.once('error', (error: NodeJS.ErrnoException) =>
			reject(
				new NoWinder(
					`${url.href} cannot be listened at (${error.code}). Give an address of this computer and a free port, such as ws://0.0.0.0:4180${url.pathname}.`
				)
			)
		);
	});
	const { port } = server.address() as { port: number };
	const pings = setInterval(() => link?.ping(), pingSeconds * 1000);
	const close = async () => {
		clearInterval(pings);
		link?.terminate();
		await new Promise<void>((resolve) => server.close(() => resolve()));
	};
	const connected = new Promise<boolean>((resolve) => {
		const late = setTimeout(() => resolve(false), winderMsMax);
		server.on('connection', (socket) => {
			// One winder at a time; its newest link counts.
			link?.terminate();
			if (link === null) clock = realClock();
			link = socket;
			inbox.newLink();
			inbox.add({ atMs: clock(), from: 'link', text: 'the winder opened a link' });
			socket.on('error', () => {});
			socket.on('message', (data: Buffer, binary) => {
				if (socket !== link) return;
				if (binary) return socket.close(1003, 'Lines are text.');
				const text = data.toString('latin1');
				inbox.bytes(Buffer.from(text.endsWith('\n') ? text : `${text}\n`, 'latin1'), clock());
			});
			clearTimeout(late);
			resolve(true);
		});
	});
	tell(
		`Waiting for the winder at ws://${url.hostname}:${port}${url.pathname}, ${winderMsMax / 1000} s at most. Let it connect there; any link key will do.`
	);
	if (!(await connected)) {
		await close();
		throw new NoWinder(`No winder came with the subprotocol ${subprotocol}.`);
	}
	return {
		wantsAcks: true,
		nowMs: () => clock(),
		gone: () => null,
		take: () => inbox.take(),
		send(texts) {
			for (let at = 0; at < texts.length; at += messageLinesMax)
				link?.send(texts.slice(at, at + messageLinesMax).join('\n'));
		},
		pass: (ms) => inbox.sleep(ms),
		close
	};
}
