import http from 'node:http';
import https from 'node:https';
import { formatLine, httpLinesMax, parseHostLine } from '../../src/lib/turnline/index.ts';
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

/** Well below what a server takes at once, so that a live line never waits behind a long one. */
const batchLinesMax = Math.min(200, httpLinesMax);
/** The server itself answers within some seconds, or says that it does not save. */
const answerMsMax = 15_000;
const pollMs = { first: 250, most: 1_000 };
const retryAfterMs = { unsaid: 1_000, most: 60_000 };

interface Answer {
	status: number;
	retryAfter: string | undefined;
	body: string;
}

/** Batches by POST, one at a time on a kept connection. */
export function openHttpUplink(target: UplinkTarget & { winder: string }, events: UplinkEvents): Uplink {
	const secure = target.server.protocol === 'https:';
	const url = new URL(`/api/v1/winders/${encodeURIComponent(target.winder)}/lines`, target.server);
	const agent = new (secure ? https : http).Agent({
		keepAlive: true,
		maxSockets: 1,
		...(target.insecureTls && { rejectUnauthorized: false })
	});
	const backoff = new Backoff();
	let linesMax = batchLinesMax;
	let nextPollMs = pollMs.first;
	let up = false;
	let ended = false;
	let asking: http.ClientRequest | null = null;
	let timer: NodeJS.Timeout | null = null;

	const post = (body: string) =>
		new Promise<Answer>((resolve, reject) => {
			const request = (secure ? https : http).request(
				url,
				{
					method: 'POST',
					agent,
					headers: {
						authorization: `Bearer ${target.linkKey}`,
						'content-type': 'text/plain',
						'content-length': Buffer.byteLength(body)
					},
					timeout: answerMsMax
				},
				(response) => {
					let text = '';
					response.setEncoding('utf8');
					response.on('data', (part: string) => (text += part));
					response.on('end', () =>
						resolve({ status: response.statusCode ?? 0, retryAfter: response.headers['retry-after'], body: text })
					);
					response.on('error', reject);
				}
			);
			asking = request;
			request.on('timeout', () => request.destroy(new Error('no answer')));
			request.on('error', reject);
			request.end(body);
		}).finally(() => (asking = null));

	/** The link is gone: an empty batch, again and again, finds out when lines would be taken. */
	const lose = (why: string, leastMs = 0): Outcome => {
		if (ended) return { kind: 'lost' };
		events.trouble(why);
		if (up) {
			up = false;
			events.down();
		}
		timer = setTimeout(() => void send([]), backoff.take(leastMs));
		return { kind: 'lost' };
	};

	const send = async (lines: readonly Outgoing[]): Promise<Outcome> => {
		let answer: Answer;
		try {
			answer = await post(lines.map(({ text }) => `${text}\n`).join(''));
		} catch (error) {
			const { code, message } = error as NodeJS.ErrnoException;
			return lose(`No link to ${url.host} (${code ?? message}). Lines are kept here; it is tried again.`);
		}
		return take(answer, lines);
	};

	const take = (answer: Answer, lines: readonly Outgoing[]): Outcome => {
		const { status } = answer;
		if (status === 200) {
			const said = readAnswer(answer.body);
			if (said === null) return lose(`${url.host} gives answers that are none of Turnstead's. Is the address right?`);
			backoff.reset();
			events.trouble(null);
			if (!up) {
				up = true;
				events.up();
			}
			nextPollMs = Math.min(said.retryMs, pollMs.most);
			if (said.ack) events.acked(said.ack.b, said.ack.n, said.ack.e);
			if (said.commands.length > 0) events.heard(said.commands);
			return { kind: 'taken', refused: said.rejected.map(({ line, why }) => ({ at: line - 1, why })) };
		}
		if (status === 429 || status === 503) {
			const seconds = Number(answer.retryAfter);
			const waitMs = answer.retryAfter !== undefined && seconds >= 0 ? seconds * 1000 : retryAfterMs.unsaid;
			events.trouble(`${url.host} takes no lines just now (${status}). They are kept here and go again.`);
			if (!up) return lose(`${url.host} takes no lines just now (${status}).`, waitMs);
			return { kind: 'later', ms: Math.min(waitMs, retryAfterMs.most) };
		}
		// Not one of its lines could be read.
		if (status === 400) return { kind: 'taken', refused: lines.map((_, at) => ({ at, why: 'unreadable' })) };
		if (status === 413 && lines.length > 1) {
			linesMax = Math.max(1, Math.floor(lines.length / 2));
			return { kind: 'later', ms: 0 };
		}
		if (status === 401 || status === 403) return lose(keyRefusedText(target.server, status), refusedBackoffMs);
		if (status === 404)
			return lose(`${url.host} knows no winder ${target.winder} with this link key (404).`, refusedBackoffMs);
		return lose(`${url.host} answers ${status}. Lines are kept here; it is tried again.`);
	};

	void send([]);

	return {
		get linesMax() {
			return linesMax;
		},
		takenIsStored: true,
		get pollMs() {
			return nextPollMs;
		},
		send,
		// A request waits for its turn on the one connection: nothing would be seen sooner.
		peek: () => {},
		async close() {
			ended = true;
			if (timer) clearTimeout(timer);
			asking?.destroy();
			agent.destroy();
		}
	};
}

interface Said {
	ack: { b: string; n: number; e: number } | null;
	commands: string[];
	rejected: { line: number; why: string }[];
	retryMs: number;
}

/** null: an answer that is none of ours, as a sign-in page of some hotel would be. */
function readAnswer(body: string): Said | null {
	let answer: Record<string, unknown>;
	try {
		answer = JSON.parse(body) as Record<string, unknown>;
	} catch {
		return null;
	}
	if (typeof answer !== 'object' || answer === null || typeof answer.stored !== 'number') return null;
	const { commands, rejected, retryMs } = answer;
	return {
		ack: readAck(answer.ack),
		commands: Array.isArray(commands) ? commands.filter((line): line is string => typeof line === 'string') : [],
		rejected: Array.isArray(rejected)
			? rejected.filter((one): one is Said['rejected'][number] => typeof one?.line === 'number')
			: [],
		retryMs: typeof retryMs === 'number' && retryMs >= 0 ? retryMs : pollMs.first
	};
}

function readAck(value: unknown): Said['ack'] {
	const { b, n, e } = (value ?? {}) as Record<string, unknown>;
	try {
		const parsed = parseHostLine(formatLine({ verb: 'ACK', b: b as string, n: n as number, e: e as number }));
		return parsed.ok && parsed.line?.verb === 'ACK' ? { b: parsed.line.b, n: parsed.line.n, e: parsed.line.e } : null;
	} catch (error) {
		if (error instanceof RangeError) return null;
		throw error;
	}
}
