import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { makeTurnstead, type Turnstead } from '../../src/lib/server/app.ts';
import { connect, inWorkshop } from '../../src/lib/server/db/connect.ts';
import { revokeLinkKey } from '../../src/lib/server/db/winders.ts';
import { newSplitter, parseHostLine, type HostLine } from '../../src/lib/turnline/index.ts';
import { plugIn, until, type Cable } from '../serial/pty.ts';
import { Clock, Counter, makeShop, queueCoil, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let app: Turnstead;
let shop: Shop;
let counter: Counter;
let folder: string;
let cable: Cable;
let told: HostLine[];

const port = () => join(folder, 'winder');

async function plug(): Promise<void> {
	cable = await plugIn(port());
	const splitter = newSplitter();
	cable.onBytes = (bytes) => {
		for (const text of splitter.push(bytes)) {
			const parsed = parseHostLine(text);
			if (!parsed.ok) throw new Error(`told what cannot be read: ${text}`);
			if (parsed.line) told.push(parsed.line);
		}
	};
}

beforeEach(async () => {
	db = await freshDatabase();
	app = makeTurnstead(connect(db.url, { role: 'turnstead_app', onLost: () => {} }));
	shop = await makeShop(db);
	const clock = new Clock();
	clock.now = Date.now();
	counter = new Counter(clock, '5C0E91A7');
	folder = mkdtempSync(join(tmpdir(), 'turnstead-serial-'));
	told = [];
	await plug();
	await app.readSerial([{ path: port(), linkKey: shop.linkKey }]);
	// It asks for the totals of now as soon as the port is open.
	await until(() => told.some((line) => line.verb === '?'));
});

afterEach(async () => {
	await app.stop();
	await cable.pull();
	rmSync(folder, { recursive: true });
	await db.drop();
});

const say = (...lines: string[]) => cable.send(`${lines.join('\n')}\n`);
const acked = (n: number) => until(() => told.some((line) => line.verb === 'ACK' && line.n >= n));

describe('a winder at a port of the server', () => {
	it('is counted, and told ACK once its lines are on disk', async () => {
		say(counter.hi(), ...counter.wind(12));
		await acked(counter.n);
		const boots = await db.owner.selectFrom('boot').selectAll().where('winder_id', '=', shop.winderId).execute();
		expect(boots).toMatchObject([{ n: counter.n, e: 2, forward: 12 }]);
		const log = app.ingest.linkLog(shop.id, shop.winderId);
		expect(log.carriers.serial).toMatchObject({ lines: counter.n + 1 });
		expect(log.links).toBe(1);
		expect(app.serialPorts()).toMatchObject([{ winder: { winderId: shop.winderId }, problem: null }]);
	});

	it('is told the plan of its coil over the cable', async () => {
		say(counter.hi());
		await queueCoil(db, shop.id, 'neck', 500);
		await until(() => app.ingest.linkLog(shop.id, shop.winderId).links === 1);
		await app.ingest.queueChanged(shop.id);
		await until(() => {
			say(counter.tick());
			return told.some((line) => line.verb === 'SET');
		});
		expect(told.find((line) => line.verb === 'SET')).toMatchObject({ b: '5C0E91A7', tgt: 500 });
	});

	it('that was unplugged and plugged in under another name goes on, and is asked for what was lost', async () => {
		say(counter.hi(), ...counter.wind(12));
		await acked(counter.n);
		const before = cable;
		await cable.pull();
		await until(() => app.ingest.linkLog(shop.id, shop.winderId).links === 0);
		// Another takes the name that has become free.
		const other = await plugIn(`${port()}.other`);
		await plug();
		expect(cable.device).not.toBe(before.device);
		const lost = counter.event('btn');
		told = [];
		await until(() => told.some((line) => line.verb === '?'));
		say(counter.hi(), counter.tick(3));
		await until(() => told.some((line) => line.verb === 'SYNC' && line.e === 2));
		say(lost);
		await until(() => told.some((line) => line.verb === 'ACK' && line.e === 3));
		expect((await app.ingest.view(shop.id, shop.winderId))?.forward).toBe(15);
		await other.pull();
	});

	it('whose lines are spoilt on the way is counted all the same, and its page says what was refused', async () => {
		say(counter.hi(), counter.event('go'));
		say(counter.tick(1).replace('f=1', 'f=7'), 'x'.repeat(500));
		cable.send(Uint8Array.of(0xff, 0x0a));
		say(counter.tick(1));
		await acked(counter.n);
		const { refused } = app.ingest.linkLog(shop.id, shop.winderId);
		expect(refused).toEqual({ checksum: 1, 'too-long': 1, 'not-ascii': 1 });
		expect((await app.ingest.view(shop.id, shop.winderId))?.forward).toBe(2);
	});

	it('whose key was revoked is not acknowledged, and its port says why', async () => {
		say(counter.hi(), counter.tick());
		await acked(1);
		await inWorkshop(db.app, shop.id, (trx) => revokeLinkKey(trx, shop.id, shop.winderId));
		await app.ingest.configChanged(shop.id, shop.winderId);
		expect(app.ingest.linkLog(shop.id, shop.winderId).links).toBe(0);
		told = [];
		say(counter.tick(1));
		await until(() => app.serialPorts()[0]?.problem?.includes('belongs to no winder') === true);
		expect(told).toEqual([]);
		expect(app.serialPorts()[0]?.problem).not.toContain(shop.linkKey);
	});
});
