import { once } from 'node:events';
import { createServer, type Server } from 'node:http';
import type { AddressInfo } from 'node:net';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { WebSocket } from 'ws';
import { makeTurnstead, type Turnstead } from '../../src/lib/server/app.ts';
import { connect, inWorkshop } from '../../src/lib/server/db/connect.ts';
import { revokeLinkKey } from '../../src/lib/server/db/winders.ts';
import { parseHostLine, type HostLine } from '../../src/lib/turnline/index.ts';
import { Clock, Counter, makeShop, queueCoil, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let app: Turnstead;
let server: Server;
let url: string;
let shop: Shop;
let counter: Counter;

beforeAll(async () => {
	db = await freshDatabase();
	app = makeTurnstead(connect(db.url, { role: 'turnstead_app', onLost: () => {} }));
	server = createServer((_, res) => res.writeHead(404).end());
	server.on('upgrade', (request, socket, head) => app.upgrade(request, socket, head));
	server.listen(0, '127.0.0.1');
	await once(server, 'listening');
	url = `ws://127.0.0.1:${(server.address() as AddressInfo).port}/api/v1/link`;
});
afterAll(async () => {
	await app.stop();
	server.close();
	await db.drop();
});
beforeEach(async () => {
	shop = await makeShop(db);
	const clock = new Clock();
	clock.now = Date.now();
	counter = new Counter(clock, '5C0E91A7');
});

/** A socket with the lines it was told, to be waited for. */
class Link {
	readonly socket: WebSocket;
	readonly told: HostLine[] = [];
	closed: number | null = null;
	#waiting: (() => void)[] = [];

	constructor(address: string, key: string | null, protocol: string | null = 'turnline.1') {
		const headers = key === null ? {} : { authorization: `Bearer ${key}` };
		this.socket = new WebSocket(address, protocol === null ? [] : [protocol], { headers });
		this.socket.on('error', () => {});
		this.socket.on('message', (data) => {
			for (const text of data.toString().split('\n')) {
				const parsed = parseHostLine(text);
				if (!parsed.ok) throw new Error(`told what cannot be read: ${text}`);
				if (parsed.line) this.told.push(parsed.line);
			}
			this.#wake();
		});
		this.socket.on('close', (code) => {
			this.closed = code;
			this.#wake();
		});
	}

	#wake(): void {
		for (const resolve of this.#waiting.splice(0)) resolve();
	}

	async until<T>(found: () => T | undefined | null | false): Promise<T> {
		for (;;) {
			const value = found();
			if (value) return value;
			await new Promise<void>((resolve) => this.#waiting.push(resolve));
		}
	}

	ack(n: number): Promise<HostLine> {
		return this.until(() => this.told.find((line) => line.verb === 'ACK' && line.n >= n));
	}

	async opened(): Promise<this> {
		await once(this.socket, 'open');
		return this;
	}
}

/** The HTTP status with which an upgrade is refused. */
async function refusedWith(
	address: string,
	key: string | null,
	protocol: string | null = 'turnline.1'
): Promise<number> {
	const link = new Link(address, key, protocol);
	const [, response] = (await once(link.socket, 'unexpected-response')) as [unknown, { statusCode: number }];
	link.socket.terminate();
	return response.statusCode;
}

const open = () => new Link(url, shop.linkKey).opened();

describe('a link', () => {
	it('needs the key of a winder, the subprotocol and the right address', async () => {
		expect(await refusedWith(url, null)).toBe(401);
		expect(await refusedWith(url, 'x'.repeat(43))).toBe(401);
		expect(await refusedWith(url, shop.linkKey, null)).toBe(400);
		expect(await refusedWith(`${url}s`, shop.linkKey)).toBe(404);
		const link = await open();
		expect(link.socket.protocol).toBe('turnline.1');
		link.socket.close();
	});

	it('opens once with a ticket', async () => {
		const { ticket } = app.keys.mintTicket({ workshopId: shop.id, winderId: shop.winderId });
		const link = await new Link(`${url}?ticket=${ticket}`, null).opened();
		expect(await refusedWith(`${url}?ticket=${ticket}`, null)).toBe(401);
		link.socket.send(counter.tick(3));
		await link.ack(1);
		expect((await app.ingest.view(shop.id, shop.winderId))?.forward).toBe(3);
		link.socket.close();
	});

	it('is told ACK of each boot it brought lines of, also of an earlier one', async () => {
		const link = await new Link(url, shop.linkKey).opened();
		link.socket.send([counter.hi(), ...counter.wind(20)].join('\n'));
		await link.ack(counter.n);
		// It restarts, and then what lay in a spool of the boot before comes.
		const last = [counter.event('btn'), counter.tick()];
		const { n, e } = counter;
		const next = new Counter(counter.clock, '77AA01F3');
		link.socket.send([next.hi(), next.tick()].join('\n'));
		await link.until(() => link.told.find((line) => line.verb === 'ACK' && line.b === '77AA01F3'));
		link.socket.send(last.join('\n'));
		const told = await link.until(() =>
			link.told.find((line) => line.verb === 'ACK' && line.b === '5C0E91A7' && line.n >= n)
		);
		expect(told).toEqual({ verb: 'ACK', b: '5C0E91A7', n, e });
		link.socket.close();
	});

	it('is told ACK once its lines are on disk', async () => {
		const link = await open();
		link.socket.send([counter.hi(), ...counter.wind(12)].join('\n'));
		expect(await link.ack(counter.n)).toEqual({ verb: 'ACK', b: '5C0E91A7', n: counter.n, e: 2 });
		const boots = await db.owner.selectFrom('boot').selectAll().where('winder_id', '=', shop.winderId).execute();
		expect(boots).toMatchObject([{ n: counter.n, e: 2, forward: 12 }]);
		link.socket.close();
	});

	it('is told the plan of its coil, and again until it answers', async () => {
		const link = await open();
		link.socket.send(counter.hi());
		await queueCoil(db, shop.id, 'neck', 500);
		await app.ingest.queueChanged(shop.id);
		const plans = () => link.told.filter((line) => line.verb === 'SET');
		await link.until(() => plans().length >= 2);
		expect(new Set(plans().map((line) => line.id)).size).toBe(1);
		expect(plans()[0]).toMatchObject({ b: '5C0E91A7', tgt: 500 });
		link.socket.close();
	});

	it('is told SYNC when an event is missing', async () => {
		const link = await open();
		link.socket.send(counter.hi());
		counter.event('go');
		link.socket.send(counter.tick(1));
		const sync = await link.until(() => link.told.find((line) => line.verb === 'SYNC'));
		expect(sync).toEqual({ verb: 'SYNC', b: '5C0E91A7', e: 0 });
		link.socket.close();
	});

	it('over the rate is told HOLD, and nothing is dropped in silence', async () => {
		const link = await open();
		for (let i = 0; i < 20; i++) {
			link.socket.send(Array.from({ length: 50 }, () => counter.tick(0, 1)).join('\n'));
		}
		const hold = await link.until(() => link.told.find((line) => line.verb === 'HOLD'));
		expect(hold).toMatchObject({ verb: 'HOLD', ms: expect.any(Number) });
		await link.ack(600);
		const boots = await db.owner.selectFrom('boot').select('n').where('winder_id', '=', shop.winderId).execute();
		expect(boots[0]!.n).toBeLessThan(1000);
		link.socket.close();
	});

	it('closes with the reason in its code', async () => {
		const binary = await open();
		binary.socket.send(Buffer.from([1, 2, 3]));
		expect(await binary.until(() => binary.closed)).toBe(1003);
		const long = await open();
		long.socket.send('#'.repeat(16 * 1024 + 1));
		expect(await long.until(() => long.closed)).toBe(1009);
		const many = await open();
		many.socket.send('\n'.repeat(51));
		expect(await many.until(() => many.closed)).toBe(1009);
	});

	it('closes with 1008 when its key is revoked', async () => {
		const link = await open();
		link.socket.send(counter.hi());
		await link.ack(0);
		await inWorkshop(db.app, shop.id, (trx) => revokeLinkKey(trx, shop.id, shop.winderId));
		await app.ingest.configChanged(shop.id, shop.winderId);
		expect(await link.until(() => link.closed)).toBe(1008);
		expect(await refusedWith(url, shop.linkKey)).toBe(401);
	});

	it('is one of five at most', async () => {
		const five = await Promise.all([open(), open(), open(), open(), open()]);
		for (const link of five) link.socket.send(counter.hi());
		await Promise.all(five.map((link) => link.ack(0)));
		const sixth = await open();
		expect(await sixth.until(() => sixth.closed)).toBe(1013);
		for (const link of five) link.socket.close();
	});

	it('beside another of the same winder counts once', async () => {
		const [cable, air] = await Promise.all([open(), open()]);
		const line = counter.tick(5);
		cable.socket.send(line);
		air.socket.send(line);
		await Promise.all([cable.ack(1), air.ack(1)]);
		expect((await app.ingest.view(shop.id, shop.winderId))?.forward).toBe(5);
		expect(app.ingest.linkLog(shop.id, shop.winderId)).toMatchObject({ links: 2, carriers: { ws: { lines: 2 } } });
		cable.socket.close();
		air.socket.close();
	});

	it('is told to come back when the server stops, after which what it sent is on disk', async () => {
		const own = makeTurnstead(connect(db.url, { role: 'turnstead_app', onLost: () => {} }));
		const stopping = createServer();
		stopping.on('upgrade', (request, socket, head) => own.upgrade(request, socket, head));
		stopping.listen(0, '127.0.0.1');
		await once(stopping, 'listening');
		const address = `ws://127.0.0.1:${(stopping.address() as AddressInfo).port}/api/v1/link`;
		const link = await new Link(address, shop.linkKey).opened();
		const watcher = own.live.open(shop.id, shop.winderId);
		link.socket.send([counter.hi(), counter.event('go')].join('\n'));
		await link.ack(1);
		link.socket.send(counter.tick(2));
		// It is counted when it is shown; the stop comes before its commit was due.
		for (;;) {
			const shown = await watcher.next();
			if (shown.kind === 'live' && shown.view.forward === 2) break;
		}
		await own.stop();
		expect(await link.until(() => link.closed)).toBe(1012);
		expect(await watcher.next()).toEqual({ kind: 'ended' });
		const boots = await db.owner.selectFrom('boot').selectAll().where('winder_id', '=', shop.winderId).execute();
		expect(boots).toMatchObject([{ n: 2, forward: 2 }]);
		stopping.close();
	});
});
