import WebSocket from 'ws';
import { messageLinesMax, pingSeconds, subprotocol } from '../src/lib/turnline/index.ts';
import {
	Backoff,
	closeMsMax,
	refusedBackoffMs,
	type Carrier,
	type CarrierEvents,
	type CarrierTarget
} from './carrier.ts';

/** Two pings of the host missed and the link is dead. */
const silenceMsMax = (2 * pingSeconds + 5) * 1000;
const openMsMax = 10_000;
/** So much unsent means that the way is blocked. */
const unsentBytesMax = 256 * 1024;
const overloadBackoffMs = 3000;

const closeCodes = { keyRevoked: 1008, overload: 1013 };

/** One WebSocket, opened again whenever it ends. */
export function openWsCarrier(target: CarrierTarget, events: CarrierEvents): Carrier {
	const url = new URL('/api/v1/link', target.server);
	url.protocol = target.server.protocol === 'https:' ? 'wss:' : 'ws:';
	const backoff = new Backoff(target.random);
	let socket: WebSocket | null = null;
	let up = false;
	let wanted = true;
	let ended = false;
	let again: NodeJS.Timeout | null = null;
	let silence: NodeJS.Timeout | null = null;
	let troubled = '';

	const say = (text: string) => {
		if (text !== troubled) events.trouble(text);
		troubled = text;
	};

	const open = () => {
		again = null;
		const link = new WebSocket(url, [subprotocol], {
			headers: { authorization: `Bearer ${target.linkKey}` },
			handshakeTimeout: openMsMax,
			perMessageDeflate: false,
			...(target.insecureTls && { rejectUnauthorized: false })
		});
		socket = link;
		let waitMs = 0;
		let refused = false;
		const hear = () => {
			if (silence) clearTimeout(silence);
			silence = setTimeout(() => link.terminate(), silenceMsMax);
		};
		link.on('open', () => {
			hear();
			backoff.reset();
			troubled = '';
			up = true;
			events.up();
		});
		link.on('ping', hear);
		link.on('message', (data, binary) => {
			hear();
			if (!binary) events.heard(String(data).split('\n'));
		});
		link.on('unexpected-response', (_request, response) => {
			const status = response.statusCode ?? 0;
			refused = true;
			if (status === 401 || status === 403 || status === 404) {
				waitMs = refusedBackoffMs;
				say(`${url.host} does not take this link key (${status}); next try in ${refusedBackoffMs / 1000} s`);
			} else {
				waitMs = 1000 * (Number(response.headers['retry-after']) || 0);
				say(`${url.host} answers ${status} instead of opening the link; trying again`);
			}
			response.resume();
			link.terminate();
		});
		link.on('error', (error: NodeJS.ErrnoException) => {
			if (!refused) say(`no link to ${url.host} (${error.code ?? error.message}); trying again`);
		});
		link.on('close', (code) => {
			if (silence) clearTimeout(silence);
			if (socket !== link) return;
			socket = null;
			const wasUp = up;
			up = false;
			if (wasUp) events.down();
			if (code === closeCodes.keyRevoked) {
				waitMs = refusedBackoffMs;
				say(`${url.host} has revoked this link key; next try in ${refusedBackoffMs / 1000} s`);
			}
			if (code === closeCodes.overload) waitMs = overloadBackoffMs;
			if (wanted && !ended) again = setTimeout(open, backoff.take(waitMs));
		});
	};
	open();

	return {
		send(lines) {
			if (!socket || !up) return;
			if (socket.bufferedAmount > unsentBytesMax) return socket.terminate();
			for (let at = 0; at < lines.length; at += messageLinesMax)
				socket.send(lines.slice(at, at + messageLinesMax).join('\n'));
		},
		cut() {
			wanted = false;
			if (again) clearTimeout(again);
			again = null;
			socket?.terminate();
		},
		mend() {
			wanted = true;
			backoff.reset();
			if (!socket && !again && !ended) open();
		},
		close(lastLine) {
			ended = true;
			if (again) clearTimeout(again);
			const link = socket;
			if (!link) return Promise.resolve();
			return new Promise((done) => {
				const late = setTimeout(() => link.terminate(), closeMsMax);
				link.on('close', () => {
					clearTimeout(late);
					done();
				});
				if (up) link.send(lastLine, () => link.close(1000));
				else link.terminate();
			});
		}
	};
}
