import http from 'node:http';
import https from 'node:https';
import { formatLine } from '../src/lib/turnline/index.ts';
import {
	Backoff,
	closeMsMax,
	refusedBackoffMs,
	type Carrier,
	type CarrierEvents,
	type CarrierTarget
} from './carrier.ts';

/** Lines of one batch: well below the 500 and the 64 KiB that a server takes. */
const batchLinesMax = 200;
/** Lines waiting while the server takes none; beyond it the ring of the winder is the better place. */
const queueLinesMax = 600;
/** Lines that come in quick succession share a batch. */
const gatherMs = 30;
const answerMsMax = 10_000;
/** When to ask for commands, as long as the server has not said. */
const pollMs = { first: 250, most: 1000 };
const retryAfterMs = { unsaid: 1000, most: 60_000 };

interface Answer {
	status: number;
	retryAfter: string | undefined;
	body: string;
}

/** Batches by POST, one at a time on a kept connection. */
export function openHttpCarrier(target: CarrierTarget, events: CarrierEvents): Carrier {
	const secure = target.server.protocol === 'https:';
	const url = new URL(`/api/v1/winders/${encodeURIComponent(target.winder)}/lines`, target.server);
	const agent = new (secure ? https : http).Agent({
		keepAlive: true,
		maxSockets: 1,
		...(target.insecureTls && { rejectUnauthorized: false })
	});
	const backoff = new Backoff(target.random);
	let queue: string[] = [];
	let batch: string[] = [];
	let up = false;
	let wanted = true;
	let ended = false;
	let asking: http.ClientRequest | null = null;
	let timer: NodeJS.Timeout | null = null;
	let timerAtMs = Infinity;
	/** No batch before this: the server said so, or the last attempt failed. */
	let notBeforeMs = 0;
	let troubled = '';

	const say = (text: string) => {
		if (text !== troubled) events.trouble(text);
		troubled = text;
	};

	/** The next batch goes at the given moment, or earlier if that was planned already. */
	const plan = (inMs: number) => {
		if (!wanted || ended || asking) return;
		const atMs = Math.max(performance.now() + inMs, notBeforeMs);
		if (timer && timerAtMs <= atMs) return;
		if (timer) clearTimeout(timer);
		timerAtMs = atMs;
		timer = setTimeout(() => {
			timer = null;
			void go();
		}, atMs - performance.now());
	};

	const lose = (why: string, leastMs = 0) => {
		say(why);
		queue = [];
		batch = [];
		notBeforeMs = performance.now() + backoff.take(leastMs);
		if (up) {
			up = false;
			events.down();
		}
		plan(0);
	};

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
						resolve({
							status: response.statusCode ?? 0,
							retryAfter: response.headers['retry-after'],
							body: text
						})
					);
					response.on('error', reject);
				}
			);
			asking = request;
			request.on('timeout', () => request.destroy(new Error('no answer')));
			request.on('error', reject);
			request.end(body);
		});

	const go = async () => {
		// There is no link to open over HTTP: an empty batch, which only asks for commands, shows whether lines would be taken.
		if (batch.length === 0) batch = queue.splice(0, batchLinesMax);
		const sent = batch;
		let answer: Answer;
		try {
			answer = await post(sent.join('\n'));
		} catch (error) {
			asking = null;
			const { code, message } = error as NodeJS.ErrnoException;
			if (wanted && !ended) lose(`no link to ${url.host} (${code ?? message}); trying again`);
			return;
		}
		asking = null;
		if (!wanted || ended) return;
		take(answer);
	};

	const take = (answer: Answer) => {
		if (answer.status === 200) {
			batch = [];
			backoff.reset();
			troubled = '';
			if (!up) {
				up = true;
				events.up();
			}
			const said = readAnswer(answer.body);
			if (said.lines.length > 0) events.heard(said.lines);
			plan(queue.length > 0 ? 0 : Math.min(said.retryMs ?? pollMs.first, pollMs.most));
		} else if (answer.status === 429 || answer.status === 503) {
			// Nothing of the batch was stored: the same batch goes again when the server said.
			const seconds = Number(answer.retryAfter);
			const waitMs = answer.retryAfter !== undefined && seconds >= 0 ? seconds * 1000 : retryAfterMs.unsaid;
			notBeforeMs = performance.now() + Math.min(waitMs, retryAfterMs.most) + target.random() * 250;
			say(`${url.host} answers ${answer.status}; the same lines go again`);
			plan(0);
		} else if (answer.status === 400) {
			// Not one line of it could be read; sent again they would not read better, and events come again by themselves.
			batch = [];
			plan(pollMs.first);
		} else if (answer.status === 413) {
			queue = [...batch.splice(Math.ceil(batch.length / 2)), ...queue];
			plan(0);
		} else if (answer.status === 401 || answer.status === 403 || answer.status === 404) {
			const pause = refusedBackoffMs / 1000;
			lose(
				`${url.host} does not take this winder and link key (${answer.status}); next try in ${pause} s`,
				refusedBackoffMs
			);
		} else lose(`${url.host} answers ${answer.status}; trying again`);
	};
	plan(0);

	return {
		send(lines) {
			if (!up) return;
			queue.push(...lines);
			if (queue.length > queueLinesMax) return lose(`${url.host} takes no lines; the winder keeps them`);
			plan(gatherMs);
		},
		cut() {
			wanted = false;
			if (timer) clearTimeout(timer);
			timer = null;
			queue = [];
			batch = [];
			asking?.destroy();
			if (up) {
				up = false;
				events.down();
			}
		},
		mend() {
			wanted = true;
			backoff.reset();
			notBeforeMs = 0;
			plan(0);
		},
		async close(lastLine) {
			ended = true;
			if (timer) clearTimeout(timer);
			const late = setTimeout(() => asking?.destroy(), closeMsMax);
			if (up) await post([...batch, ...queue, lastLine].slice(-batchLinesMax).join('\n')).catch(() => null);
			clearTimeout(late);
			agent.destroy();
		}
	};
}

/** The answer to a batch as the lines it stands for. An answer that is none of ours stands for nothing. */
function readAnswer(body: string): { lines: string[]; retryMs: number | null } {
	let answer: unknown;
	try {
		answer = JSON.parse(body);
	} catch {
		return { lines: [], retryMs: null };
	}
	const { ack, commands, retryMs } = (answer ?? {}) as Record<string, unknown>;
	const lines: string[] = [];
	if (typeof ack === 'object' && ack !== null) {
		const { b, n, e } = ack as Record<string, unknown>;
		try {
			lines.push(formatLine({ verb: 'ACK', b: b as string, n: n as number, e: e as number }));
		} catch (error) {
			if (!(error instanceof RangeError)) throw error;
		}
	}
	if (Array.isArray(commands)) lines.push(...commands.filter((line) => typeof line === 'string'));
	return { lines, retryMs: typeof retryMs === 'number' && retryMs >= 0 ? retryMs : null };
}
