import http, { type IncomingMessage, type ServerResponse } from 'node:http';
import type { AddressInfo } from 'node:net';
import { afterEach, describe, expect, it, vi } from 'vitest';
import { WebSocketServer, type WebSocket } from 'ws';
import { formatLine, parseDeviceLine, type DeviceLine } from '../src/lib/turnline/index.ts';
import { isLoopback, runSimulation, startSimulation, type SimulationOptions } from './run.ts';
import type { TruthEntry } from './winder.ts';

// Nothing here is about pace: a busy machine may take its time.
vi.setConfig({ testTimeout: 120_000 });

/** A small host on loopback: stores, acknowledges without a gap, and sends each boot one plan. */
class Host {
	readonly lines: DeviceLine[] = [];
	readonly messages: number[] = [];
	readonly authorisations = new Set<string | undefined>();
	/** Answers to give before a batch is taken; `lines`: only to a batch with lines, not to a poll. */
	readonly refusals: { status: number; retryAfter?: string; lines?: true }[] = [];
	readonly bodies: string[] = [];
	readonly sockets = new Set<WebSocket>();
	onLine: (line: DeviceLine) => void = () => {};
	url = '';

	private readonly events = new Set<number>();
	private n = 0;
	private boot = '';
	private planned = false;
	private readonly server = http.createServer((request, response) => void this.answer(request, response));
	private readonly ws = new WebSocketServer({ server: this.server, path: '/api/v1/link' });

	constructor(private readonly target = 60) {
		this.ws.on('connection', (socket, request) => {
			this.authorisations.add(request.headers.authorization);
			this.sockets.add(socket);
			socket.on('close', () => this.sockets.delete(socket));
			socket.on('message', (data) => {
				const texts = String(data).split('\n');
				this.messages.push(texts.length);
				for (const line of this.take(texts)) socket.send(line);
			});
		});
	}

	async listen(): Promise<this> {
		await new Promise<void>((done) => this.server.listen(0, '127.0.0.1', done));
		this.url = `http://127.0.0.1:${(this.server.address() as AddressInfo).port}`;
		return this;
	}

	async close(): Promise<void> {
		for (const socket of this.sockets) socket.terminate();
		this.ws.close();
		this.server.closeAllConnections();
		await new Promise((done) => this.server.close(done));
	}

	/** The greatest totals of the last boot. */
	get totals() {
		const of = this.lines.filter((line) => line.verb === 'T' || line.verb === 'E' || line.verb === 'HI');
		const last = of.filter((line) => line.b === this.boot);
		return { f: Math.max(...last.map((line) => line.f)), v: Math.max(...last.map((line) => line.v)) };
	}

	private take(texts: string[]): string[] {
		const answers: string[] = [];
		for (const text of texts) {
			const parsed = parseDeviceLine(text);
			if (!parsed.ok || !parsed.line) continue;
			const line = parsed.line;
			this.lines.push(line);
			if ('f' in line && line.b !== this.boot) {
				this.boot = line.b;
				this.events.clear();
				this.n = 0;
				this.planned = false;
			}
			if (line.verb === 'OK') this.planned = true;
			if (line.verb === 'E') this.events.add(line.e);
			if (line.verb === 'E' || line.verb === 'T') this.n = Math.max(this.n, line.n);
			this.onLine(line);
		}
		if (this.boot !== '' && !this.planned) answers.push(this.plan);
		if (this.n > 0) answers.push(formatLine({ verb: 'ACK', ...this.ack }));
		return answers;
	}

	private get plan() {
		return formatLine({ verb: 'SET', id: 1, b: this.boot, tgt: this.target, look: 0, ease: 40, stop: 3 });
	}

	private get ack() {
		let e = 0;
		while (this.events.has(e + 1)) e++;
		return { b: this.boot, n: this.n, e };
	}

	private async answer(request: IncomingMessage, response: ServerResponse): Promise<void> {
		let body = '';
		for await (const part of request) body += String(part);
		this.authorisations.add(request.headers.authorization);
		this.bodies.push(body);
		const refusal = this.refusals[0]?.lines && body === '' ? undefined : this.refusals.shift();
		if (refusal) {
			response.writeHead(refusal.status, refusal.retryAfter === undefined ? {} : { 'retry-after': refusal.retryAfter });
			response.end();
			return;
		}
		const commands = this.take(body.split('\n')).filter((line) => !line.startsWith('ACK'));
		response.setHeader('content-type', 'application/json');
		response.end(JSON.stringify({ ack: this.n > 0 ? this.ack : null, commands, retryMs: 20 }));
	}
}

const hosts: Host[] = [];
afterEach(async () => {
	for (const host of hosts.splice(0)) await host.close();
});
const newHost = async (target?: number) => {
	const host = await new Host(target).listen();
	hosts.push(host);
	return host;
};

const options = (host: Host, more: Partial<SimulationOptions>): SimulationOptions => ({
	server: host.url,
	winders: [{ winder: 'w-01', linkKey: 'the-link-key', name: 'w-01' }],
	scenario: 'first-coil',
	speedUp: 100,
	...more
});

describe.each(['ws', 'http'] as const)('over %s', (carrier) => {
	it('a coil is wound, every event acknowledged, and goodbye said', async () => {
		const host = await newHost();
		const truth: TruthEntry[] = [];
		const result = await runSimulation(options(host, { carrier, truth: (entry) => truth.push(entry) }));
		expect(result.allAcknowledged).toBe(true);
		const [winder] = result.winders;
		expect(winder!.coilsReached).toBe(1);
		expect(Math.abs(winder!.revolutions - 60)).toBeLessThanOrEqual(3);
		const boot = winder!.boots[0]!;
		expect(host.totals).toEqual({ f: boot.forward, v: boot.reverse });
		expect(host.authorisations).toEqual(new Set(['Bearer the-link-key']));
		expect(host.lines[0]).toMatchObject({ verb: 'HI', dev: 'w-01', rep: 10_000 });
		expect(host.lines[host.lines.length - 1]).toEqual({ verb: 'BYE', b: boot.boot });
		expect(Math.max(0, ...host.messages)).toBeLessThanOrEqual(50);
		expect(truth[truth.length - 1]!.kind).toBe('final');
	});

	it('over a bad link too the host ends with the totals of the winder', async () => {
		const host = await newHost();
		const faults = {
			drop: 0.2,
			double: 0.2,
			reorder: 0.2,
			corrupt: 0.2,
			delayMs: 20,
			outages: [{ fromS: 0.2, forS: 0.2 }]
		};
		const result = await runSimulation(options(host, { carrier, faults }));
		expect(result.allAcknowledged).toBe(true);
		const boot = result.winders[0]!.boots[0]!;
		expect(host.totals).toEqual({ f: boot.forward, v: boot.reverse });
	});

	it('a restart in the middle of the coil comes back as another boot', async () => {
		const host = await newHost(100);
		const simulation = startSimulation(options(host, { carrier, scenario: 'restart-mid-coil', coils: null }));
		const boots = new Set<string>();
		await new Promise<void>((done) => {
			host.onLine = (line) => {
				if (line.verb === 'HI') boots.add(line.b);
				if (boots.size === 2) done();
			};
		});
		const result = await simulation.stop(5000);
		expect(result.winders[0]!.boots.map((boot) => boot.boot)).toEqual([...boots]);
	});

	it('told to stop, it says goodbye and ends', async () => {
		const host = await newHost();
		const abort = new AbortController();
		const told = runSimulation(options(host, { carrier, scenario: 'workshop', signal: abort.signal }));
		host.onLine = (line) => {
			if (line.verb === 'E') abort.abort();
		};
		const result = await told;
		expect(result.winders[0]!.coilsReached).toBeLessThanOrEqual(1);
		expect(host.lines[host.lines.length - 1]!.verb).toBe('BYE');
	});
});

describe('a link that ends', () => {
	it('is opened again, with the birth line first', async () => {
		const host = await newHost(2000);
		const simulation = startSimulation(options(host, { carrier: 'ws', scenario: 'workshop' }));
		const births: number[] = [];
		await new Promise<void>((done) => {
			host.onLine = (line) => {
				if (line.verb === 'HI') births.push(line.f);
				if (line.verb === 'T' && line.f > 50 && births.length === 1)
					for (const socket of host.sockets) socket.close(1012);
				if (births.length === 2) done();
			};
		});
		expect(births[1]).toBeGreaterThan(50);
		await simulation.stop();
	});

	it('over HTTP a batch that was not stored goes again as it was', async () => {
		const host = await newHost();
		const simulation = startSimulation(options(host, { carrier: 'http' }));
		let refusedAt = -1;
		host.onLine = (line) => {
			if (line.verb !== 'E' || refusedAt >= 0) return;
			refusedAt = host.bodies.length;
			host.refusals.push({ status: 429, retryAfter: '0', lines: true }, { status: 503, retryAfter: '0', lines: true });
		};
		const result = await simulation.done;
		expect(result.allAcknowledged).toBe(true);
		const [first, second, third] = host.bodies.slice(refusedAt).filter((body) => body !== '');
		expect(first).toBeDefined();
		expect(second).toBe(first);
		expect(third).toBe(first);
	});

	it('a server that does not know the key is told of once, not hammered', async () => {
		const host = await newHost();
		for (let times = 0; times < 100; times++) host.refusals.push({ status: 401 });
		const problems: string[] = [];
		await new Promise<void>((done) => {
			const simulation = startSimulation(
				options(host, {
					carrier: 'http',
					tell: (text, problem) => {
						if (!problem) return;
						problems.push(text);
						void simulation.stop(200).then(() => done());
					}
				})
			);
		});
		expect(problems).toEqual([expect.stringContaining('does not take this winder and link key (401)')]);
		expect(host.bodies).toHaveLength(1);
	});

	it('several winders wind side by side, each with its own hands', async () => {
		const one = await newHost();
		const winders = ['w-01', 'w-02'].map((winder) => ({ winder, linkKey: 'the-link-key' }));
		// The little host knows one boot at a time, so only what the winders themselves did is looked at.
		const simulation = startSimulation(options(one, { winders, scenario: 'workshop' }));
		await new Promise<void>((done) => {
			one.onLine = () => {
				if (simulation.winders.every((winder) => winder.spindle.pathTurns > 5)) done();
			};
		});
		await simulation.stop(100);
		const [first, second] = simulation.winders;
		expect(first!.device.boot).not.toBe(second!.device.boot);
		expect(first!.spindle.angleTurns).not.toBe(second!.spindle.angleTurns);
	});
});

describe('a certificate nobody vouches for', () => {
	it('is taken on this machine only', () => {
		expect(['localhost', '127.0.0.1', '127.8.8.8', '[::1]'].every(isLoopback)).toBe(true);
		expect(['shop.example', '127.0.0.1.example', '10.0.0.1', '0.0.0.0'].some(isLoopback)).toBe(false);
		const server = 'https://shop.example';
		expect(() => startSimulation({ server, winders: [{ winder: 'w', linkKey: 'k' }], insecureTls: true })).toThrow(
			RangeError
		);
	});
});
