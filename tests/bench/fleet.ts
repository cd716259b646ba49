import { Agent, get, request, type ClientRequest, type IncomingMessage } from 'node:http';
import WebSocket from 'ws';
import { subprotocol } from '../../src/lib/turnline/index.ts';
import { MqttClient } from './mqtt.ts';

/**
 * Winders and their screens at one of the ways that are measured. A fleet sends the lines of a winder and says which count
 * a screen was shown and when; both in this process, so that one clock tells both.
 */
export interface Fleet {
	readonly size: number;
	send(winder: number, lines: string[]): void;
	/** Told with the count a screen has whole. */
	onSeen: (winder: number, turns: number, atMs: number) => void;
	close(): Promise<void>;
}

/** Where the winders of a fleet send and its screens look. */
export interface Places {
	port: number;
	linkPath(winder: number): string;
	linesPath(winder: number): string;
	livePath(winder: number): string;
	/** Headers of requests of a winder. */
	headers(winder: number): Record<string, string>;
	/** Finds the count in an event. */
	count: RegExp;
}

export const relayPlaces = (port: number): Places => ({
	port,
	linkPath: (winder) => `/${winder}`,
	linesPath: (winder) => `/${winder}`,
	livePath: (winder) => `/${winder}`,
	headers: () => ({}),
	count: / f=(\d+) /
});

export const serverPlaces = (port: number, winders: readonly { id: string; linkKey: string }[]): Places => {
	const of = (winder: number) => winders[winder] as { id: string; linkKey: string };
	return {
		port,
		linkPath: () => '/api/v1/link',
		linesPath: (winder) => `/api/v1/winders/${of(winder).id}/lines`,
		livePath: (winder) => `/api/v1/winders/${of(winder).id}/live`,
		headers: (winder) => ({ authorization: `Bearer ${of(winder).linkKey}` }),
		count: /"forward":(\d+)/
	};
};

const openMsMax = 20_000;

/** `carrier` says how lines go in; the screens read server-sent events. */
export async function openFleet(size: number, places: Places, carrier: 'ws' | 'http'): Promise<Fleet> {
	const seen: Fleet = { size, send: () => {}, onSeen: () => {}, close: async () => {} };
	const screens = await all(size, (winder) =>
		openScreen(places, winder, (turns, atMs) => seen.onSeen(winder, turns, atMs))
	);
	const links = await all(size, (winder) => (carrier === 'ws' ? openLink(places, winder) : openPoster(places, winder)));
	seen.send = (winder, lines) => links[winder]?.send(lines);
	seen.close = async () => {
		await Promise.all(links.map((link) => link.close()));
		for (const screen of screens) screen.destroy();
	};
	return seen;
}

/** Winders that publish and screens that subscribe, at QoS 1. */
export async function openBrokerFleet(size: number, port: number): Promise<Fleet> {
	const fleet: Fleet = { size, send: () => {}, onSeen: () => {}, close: async () => {} };
	const topic = (winder: number) => `winder/${winder}/lines`;
	const screens = await all(size, async (winder) => {
		const screen = await MqttClient.open(port, `screen-${size}-${winder}`);
		screen.onMessage = (_, payload) => {
			const atMs = performance.now();
			const turns = / f=(\d+) /.exec(payload.toString());
			if (turns) fleet.onSeen(winder, Number(turns[1]), atMs);
		};
		await screen.subscribe(topic(winder));
		return screen;
	});
	const winders = await all(size, (winder) => MqttClient.open(port, `winder-${size}-${winder}`));
	fleet.send = (winder, lines) => winders[winder]?.publish(topic(winder), lines.join('\n'));
	fleet.close = async () => void (await Promise.all([...screens, ...winders].map((client) => client.end())));
	return fleet;
}

/** In tens, so that no listen queue overflows. */
async function all<T>(size: number, make: (winder: number) => Promise<T>): Promise<T[]> {
	const made: T[] = [];
	for (let at = 0; at < size; at += 10) {
		const few = Array.from({ length: Math.min(10, size - at) }, (_, i) => make(at + i));
		made.push(...(await Promise.all(few)));
	}
	return made;
}

/** Resolves with the first event. Once open, a stream that ends ends the measurement. */
function openScreen(
	places: Places,
	winder: number,
	seen: (turns: number, atMs: number) => void
): Promise<ClientRequest> {
	return new Promise((resolve, reject) => {
		const asked = get(
			{
				host: '127.0.0.1',
				port: places.port,
				path: places.livePath(winder),
				headers: { ...places.headers(winder), accept: 'text/event-stream' },
				agent: false
			},
			(answer) => {
				if (answer.statusCode !== 200) {
					return reject(new Error(`a screen was answered with ${answer.statusCode}`));
				}
				let text = '';
				answer.setEncoding('utf8');
				answer.on('data', (chunk: string) => {
					const atMs = performance.now();
					text += chunk;
					const end = text.lastIndexOf('\n\n');
					if (end < 0) return;
					// Of several states that came at once the last is the greatest.
					for (const event of text.slice(0, end).split('\n\n')) {
						const turns = places.count.exec(event);
						if (turns) seen(Number(turns[1]), atMs);
					}
					text = text.slice(end + 2);
					resolve(asked);
				});
			}
		);
		asked.setTimeout(openMsMax, () => reject(new Error('a screen was not answered')));
		asked.on('error', reject);
	});
}

interface Link {
	send(lines: string[]): void;
	close(): Promise<void>;
}

function openLink(places: Places, winder: number): Promise<Link> {
	return new Promise((resolve, reject) => {
		const url = `ws://127.0.0.1:${places.port}${places.linkPath(winder)}`;
		const link = new WebSocket(url, [subprotocol], { headers: places.headers(winder), perMessageDeflate: false });
		link.once('error', reject);
		link.once('open', () =>
			resolve({
				send: (lines) => link.send(lines.join('\n')),
				close: () =>
					new Promise((closed) => {
						link.once('close', () => closed());
						if (link.readyState === link.CLOSED) closed();
						else link.close();
					})
			})
		);
	});
}

/** Requests of one winder under way at once. An answer comes when the lines are on disk, and no line waits for it here. */
const postsAtOnce = 8;

/** A POST a line: what an answer waits for is measured elsewhere, here it is the way to the screen. */
async function openPoster(places: Places, winder: number): Promise<Link> {
	const agent = new Agent({ keepAlive: true, maxSockets: postsAtOnce });
	const asking = new Set<Promise<void>>();
	return {
		send(lines) {
			const asked = post(places, winder, lines, agent).then(({ status, body }) => {
				asking.delete(asked);
				if (status !== 200) throw new Error(`lines were answered with ${status}: ${body}`);
			});
			asking.add(asked);
		},
		async close() {
			await Promise.all(asking);
			agent.destroy();
		}
	};
}

/** One POST of lines. */
export function post(
	places: Places,
	winder: number,
	lines: string[],
	agent: Agent
): Promise<{ status: number; body: string }> {
	const text = lines.join('\n');
	return new Promise((resolve, reject) => {
		const asked = request(
			{
				host: '127.0.0.1',
				port: places.port,
				path: places.linesPath(winder),
				method: 'POST',
				agent,
				headers: {
					...places.headers(winder),
					'content-type': 'text/plain',
					'content-length': Buffer.byteLength(text)
				}
			},
			(answer) => void bodyOf(answer).then((body) => resolve({ status: answer.statusCode ?? 0, body }), reject)
		);
		asked.on('error', (error: NodeJS.ErrnoException) => {
			// The server ended a connection that was idle at the moment it was taken again.
			if (asked.reusedSocket && error.code === 'ECONNRESET') resolve(post(places, winder, lines, agent));
			else reject(error);
		});
		asked.end(text);
	});
}

export async function bodyOf(answer: IncomingMessage): Promise<string> {
	let body = '';
	answer.setEncoding('utf8');
	for await (const part of answer) body += part as string;
	return body;
}
