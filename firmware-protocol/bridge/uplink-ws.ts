import WebSocket from 'ws';
import { messageLinesMax, parseHostLine, pingSeconds, subprotocol } from '../../src/lib/turnline/index.ts';
import {
	Backoff,
	keyRefusedText,
	refusedBackoffMs,
	type Outcome,
	type Outgoing,
	type Uplink,
	type UplinkEvents,
	type UplinkTarget
} from './uplink.ts';

/** Two pings of the host missed and the link is dead. */
const silenceMsMax = (2 * pingSeconds + 5) * 1000;
const openMsMax = 10_000;
/** An answer waits for the server's disk; one that is away for longer says HOLD, or is met again on a new link. */
const answerMsMax = 30_000;
/** So much unsent means that the way is blocked. */
const unsentBytesMax = 64 * 1024;
const overloadBackoffMs = 3_000;
const closeCodes = { keyRevoked: 1008, overload: 1013 };

/**
 * One WebSocket, opened again whenever it ends. A message with totals is answered by `ACK`, once what it brought is on disk,
 * or by `HOLD`, when nothing of it was taken in.
 */
export function openWsUplink(target: UplinkTarget, events: UplinkEvents): Uplink {
	const url = new URL('/api/v1/link', target.server);
	url.protocol = target.server.protocol === 'https:' ? 'wss:' : 'ws:';
	const backoff = new Backoff();
	let socket: WebSocket | null = null;
	let up = false;
	let ended = false;
	let again: NodeJS.Timeout | null = null;
	/** The message that waits for its answer. `tops`: its greatest `n` of each boot. */
	let waiting: { tops: Map<string, number>; answer: (outcome: Outcome) => void } | null = null;
	/** What was shown beside it: an answer to that must not be taken for its own. */
	const peeked = new Map<string, number>();
	const acks = new Map<string, number>();
	let holdUntilMs = 0;

	const answer = (outcome: Outcome) => {
		const asked = waiting;
		waiting = null;
		asked?.answer(outcome);
	};

	const hear = (text: string, commands: string[]) => {
		const parsed = parseHostLine(text);
		if (!parsed.ok) {
			// A verb of a later version is the winder's to answer; what is spoilt is nobody's.
			if (parsed.why === 'verb') commands.push(text);
			return;
		}
		if (!parsed.line) return;
		if (parsed.line.verb === 'ACK') {
			const { b, n, e } = parsed.line;
			acks.set(b, Math.max(acks.get(b) ?? 0, n));
			if (n >= (peeked.get(b) ?? Infinity)) peeked.delete(b);
			events.acked(b, n, e);
			if (!waiting) return;
			const reached = [...waiting.tops].every(([boot, top]) => (acks.get(boot) ?? -1) >= top);
			if (peeked.size === 0 || (waiting.tops.size > 0 && reached)) answer({ kind: 'taken', refused: [] });
		} else if (parsed.line.verb === 'HOLD') {
			holdUntilMs = performance.now() + parsed.line.ms;
			peeked.clear();
			answer({ kind: 'later', ms: parsed.line.ms });
		} else commands.push(text);
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
		let silence: NodeJS.Timeout | null = null;
		const alive = () => {
			if (silence) clearTimeout(silence);
			silence = setTimeout(() => link.terminate(), silenceMsMax);
		};
		link.on('open', () => {
			alive();
			backoff.reset();
			acks.clear();
			peeked.clear();
			holdUntilMs = 0;
			up = true;
			events.trouble(null);
			events.up();
		});
		link.on('ping', alive);
		link.on('message', (data, binary) => {
			alive();
			if (binary) return;
			const commands: string[] = [];
			for (const text of String(data).split('\n')) if (text !== '') hear(text, commands);
			if (commands.length > 0) events.heard(commands);
		});
		link.on('unexpected-response', (_request, response) => {
			const status = response.statusCode ?? 0;
			refused = true;
			if (status === 401 || status === 403) {
				waitMs = refusedBackoffMs;
				events.trouble(keyRefusedText(target.server, status));
			} else {
				waitMs = 1000 * (Number(response.headers['retry-after']) || 0);
				events.trouble(
					`${url.host} answers ${status} instead of opening the link. Lines are kept here; it is tried again.`
				);
			}
			response.resume();
			link.terminate();
		});
		link.on('error', (error: NodeJS.ErrnoException) => {
			if (!refused)
				events.trouble(
					`No link to ${url.host} (${error.code ?? error.message}). Lines are kept here; it is tried again.`
				);
		});
		link.on('close', (code) => {
			if (silence) clearTimeout(silence);
			if (socket !== link) return;
			socket = null;
			const wasUp = up;
			up = false;
			answer({ kind: 'lost' });
			if (code === closeCodes.keyRevoked) {
				waitMs = refusedBackoffMs;
				events.trouble(keyRefusedText(target.server, code));
			}
			if (code === closeCodes.overload) waitMs = overloadBackoffMs;
			if (wasUp) events.down();
			if (!ended) again = setTimeout(open, backoff.take(waitMs));
		});
	};

	const write = (lines: readonly Outgoing[]) => socket?.send(lines.map(({ text }) => text).join('\n'));
	open();

	return {
		linesMax: messageLinesMax,
		takenIsStored: false,
		pollMs: null,
		async send(lines) {
			if (!socket || !up) return { kind: 'lost' };
			const heldMs = holdUntilMs - performance.now();
			if (heldMs > 0) return { kind: 'later', ms: heldMs };
			const tops = topsOf(lines);
			const isAnswered = lines.some(({ line }) => line.verb === 'T' || line.verb === 'E' || line.verb === 'HI');
			if (!isAnswered) {
				write(lines);
				return { kind: 'taken', refused: [] };
			}
			const link = socket;
			const late = setTimeout(() => link.terminate(), answerMsMax);
			const outcome = await new Promise<Outcome>((resolve) => {
				waiting = { tops, answer: resolve };
				write(lines);
			});
			clearTimeout(late);
			return outcome;
		},
		peek(lines) {
			if (!socket || !up || performance.now() < holdUntilMs || socket.bufferedAmount > unsentBytesMax) return;
			for (const [b, n] of topsOf(lines)) peeked.set(b, Math.max(peeked.get(b) ?? 0, n));
			write(lines);
		},
		close() {
			ended = true;
			if (again) clearTimeout(again);
			const link = socket;
			if (!link) return Promise.resolve();
			return new Promise((done) => {
				const late = setTimeout(() => link.terminate(), 500);
				link.on('close', () => {
					clearTimeout(late);
					done();
				});
				if (up) link.close(1000);
				else link.terminate();
			});
		}
	};
}

function topsOf(lines: readonly Outgoing[]): Map<string, number> {
	const tops = new Map<string, number>();
	for (const { line } of lines)
		if (line.verb === 'T' || line.verb === 'E') tops.set(line.b, Math.max(tops.get(line.b) ?? 0, line.n));
	return tops;
}
