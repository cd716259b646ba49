import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { isHttpError, isRedirect } from '@sveltejs/kit';
import { makeTurnstead, turnstead, type Turnstead } from '../../src/lib/server/app.ts';
import { connect } from '../../src/lib/server/db/connect.ts';
import { httpBytesMax } from '../../src/lib/turnline/index.ts';
import { GET as getHealth } from '../../src/routes/healthz/+server.ts';
import { GET as getRuns } from '../../src/routes/api/v1/runs/+server.ts';
import { GET as getRun } from '../../src/routes/api/v1/runs/[run]/+server.ts';
import { GET as getLive } from '../../src/routes/api/v1/winders/[winder]/live/+server.ts';
import { POST as postLines } from '../../src/routes/api/v1/winders/[winder]/lines/+server.ts';
import { POST as postTap } from '../../src/routes/api/v1/winders/[winder]/taps/+server.ts';
import { Clock, Counter, makeShop, queueCoil, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let app: Turnstead;
let shop: Shop;
let counter: Counter;

const place = Symbol.for('turnstead');

beforeAll(async () => {
	db = await freshDatabase();
	app = makeTurnstead(connect(db.url, { role: 'turnstead_app', onLost: () => {} }));
	Reflect.set(globalThis, place, app);
});
afterAll(async () => {
	await app.stop();
	await db.drop();
});
beforeEach(async () => {
	shop = await makeShop(db);
	const clock = new Clock();
	clock.now = Date.now();
	counter = new Counter(clock, '5C0E91A7');
});

interface Asked {
	method?: string;
	body?: string | Uint8Array<ArrayBuffer>;
	type?: string | null;
	key?: string | null;
	winder?: string;
	run?: string;
	search?: string;
	accept?: string;
	as?: { role: 'owner' | 'maker' | 'apprentice' };
	signal?: AbortSignal;
}

/** Calls an endpoint as the router would; what it throws becomes the status the hooks would answer. */
async function call(endpoint: unknown, asked: Asked): Promise<Response> {
	const headers = new Headers();
	if (asked.type) headers.set('content-type', asked.type);
	if (asked.key) headers.set('authorization', `Bearer ${asked.key}`);
	if (asked.accept) headers.set('accept', asked.accept);
	const url = new URL(`http://127.0.0.1/api/v1/x${asked.search ?? ''}`);
	const request = new Request(url, {
		method: asked.method ?? 'GET',
		headers,
		...(asked.body === undefined ? {} : { body: asked.body }),
		...(asked.signal ? { signal: asked.signal } : {})
	});
	const member = asked.as && { workshopId: shop.id, id: shop.ada, name: 'Ada Quill', role: asked.as.role };
	const event = {
		request,
		url,
		params: { winder: asked.winder ?? shop.winderId, run: asked.run ?? '' },
		locals: { member: member ?? null, db: turnstead().db }
	};
	try {
		return await (endpoint as (event: unknown) => Promise<Response>)(event);
	} catch (thrown) {
		if (isRedirect(thrown)) return new Response(null, { status: 401 });
		if (isHttpError(thrown)) return new Response(null, { status: thrown.status });
		throw thrown;
	}
}

const post = (body: Asked['body'], more: Asked = {}) =>
	call(postLines, { method: 'POST', body, type: 'text/plain', key: shop.linkKey, ...more });
const tap = (body: unknown, as: Asked['as'] | null = { role: 'apprentice' }) =>
	call(postTap, { method: 'POST', body: JSON.stringify(body), type: 'application/json', ...(as ? { as } : {}) });

async function isProblem(response: Response, status: number): Promise<Record<string, unknown>> {
	expect(response.status).toBe(status);
	expect(response.headers.get('content-type')).toBe('application/problem+json');
	const body = (await response.json()) as Record<string, unknown>;
	expect(body).toMatchObject({ type: 'about:blank', status, title: expect.any(String), detail: expect.any(String) });
	return body;
}

describe('lines over HTTP', () => {
	it('are answered with the four counts, the acknowledgement, commands and when to come again', async () => {
		const response = await post([counter.hi(), counter.event('go'), counter.tick(1)].join('\r\n') + '\n');
		expect(response.status).toBe(200);
		expect(await response.json()).toEqual({
			ack: { b: '5C0E91A7', n: 2, e: 1 },
			stored: 3,
			thinned: 0,
			duplicate: 0,
			rejected: [],
			commands: [],
			retryMs: 200
		});
	});

	it('are acknowledged and kept whole while the winder is read in capitals', async () => {
		await queueCoil(db, shop.id, 'neck', 500);
		const capitals = shop.winderId.toUpperCase();
		await post(counter.hi());
		for (let batch = 0; batch < 25; batch++) {
			const [sent, shown] = await Promise.all([
				post(counter.wind(2).join('\n')),
				call(getLive, { key: shop.linkKey, winder: capitals })
			]);
			expect(await sent.json()).toMatchObject({ duplicate: 0, ack: { n: counter.n, e: counter.e } });
			expect(await shown.json()).toMatchObject({ winderId: shop.winderId });
		}
		const shown = await call(getLive, { as: { role: 'maker' }, winder: capitals });
		expect(await shown.json()).toMatchObject({ forward: 50, run: { turns: 50 } });
		const facts = await db.owner
			.selectFrom('fact')
			.select(['no', 'kind'])
			.where('winder_id', '=', shop.winderId)
			.orderBy('no')
			.execute();
		expect(facts.map((fact) => fact.no)).toEqual(facts.map((_, i) => i + 1));
		expect(facts.filter((fact) => fact.kind === 'stopped')).toHaveLength(25);
	});

	it('may be none: a poll', async () => {
		const response = await post('# nothing new\n');
		expect(response.status).toBe(200);
		expect(await response.json()).toMatchObject({ stored: 0, rejected: [], retryMs: 1000 });
	});

	it('may be one JSON text a line', async () => {
		const line = JSON.stringify({ verb: 'T', b: '5C0E91A7', n: 1, e: 0, f: 3, v: 0, r: 58, t: 1040 });
		const response = await post(line, { type: 'application/x-ndjson; charset=utf-8' });
		expect(await response.json()).toMatchObject({ stored: 1 });
	});

	it('that cannot be read are 400, each with its reason', async () => {
		const body = await isProblem(await post('T f=1 v=0\nhello\n'), 400);
		expect(body.rejected).toHaveLength(2);
	});

	it('of bytes that are no text are refused line by line', async () => {
		const good = new TextEncoder().encode(`${counter.tick(1)}\n`);
		const response = await post(new Uint8Array([0xff, 0x00, 0x80, 0x0a, ...good]));
		expect(await response.json()).toMatchObject({ stored: 1, rejected: [{ line: 1, why: 'not-ascii' }] });
	});

	it('without a key, or with one nobody has, are 401', async () => {
		const none = await post('', { key: null });
		expect(none.headers.get('www-authenticate')).toBe('Bearer');
		await isProblem(none, 401);
		await isProblem(await post('', { key: 'x'.repeat(43) }), 401);
	});

	it('to another winder than the key’s own are 404, as is one that does not exist', async () => {
		const other = await makeShop(db);
		await isProblem(await post('', { winder: other.winderId }), 404);
		await isProblem(await post('', { winder: randomUUID() }), 404);
		await isProblem(await post('', { winder: 'w-01' }), 404);
	});

	it('of more than 500 or more than 64 KiB are 413', async () => {
		await isProblem(await post('\n'.repeat(501)), 413);
		await isProblem(await post('#'.repeat(httpBytesMax + 1)), 413);
		expect((await post('\n'.repeat(500))).status).toBe(200);
	});

	it('as anything else than text or NDJSON are 415', async () => {
		await isProblem(await post('{}', { type: 'application/json' }), 415);
	});

	it('over the rate are 429 with when to come again, and nothing is taken in', async () => {
		const batch = () => Array.from({ length: 450 }, () => counter.tick(0, 1)).join('\n');
		expect((await post(batch())).status).toBe(200);
		const refused = await post(batch());
		expect(Number(refused.headers.get('retry-after'))).toBeGreaterThan(0);
		await isProblem(refused, 429);
		const rows = await db.owner.selectFrom('boot').select('n').where('winder_id', '=', shop.winderId).execute();
		expect(rows).toEqual([{ n: 450 }]);
	});
});

describe('the live state', () => {
	it('can be read by a member and with the winder’s own key, and by nobody else', async () => {
		await post([counter.hi(), counter.tick(4)].join('\n'));
		const expected = { boot: '5C0E91A7', forward: 4, reverse: 0, net: 4, link: 'live', run: null };
		expect(await (await call(getLive, { as: { role: 'apprentice' } })).json()).toMatchObject(expected);
		const own = (await (await call(getLive, { key: shop.linkKey })).json()) as { ageMs: number };
		expect(own).toMatchObject(expected);
		expect(own.ageMs).toBeGreaterThanOrEqual(0);
		expect((await call(getLive, {})).status).toBe(401);
		const other = await makeShop(db);
		await isProblem(await call(getLive, { key: other.linkKey }), 404);
		await isProblem(await call(getLive, { as: { role: 'owner' }, winder: other.winderId }), 404);
	});

	it('has the run with what the bench shows of it', async () => {
		await queueCoil(db, shop.id, 'neck', 200);
		await post([counter.hi(), ...counter.wind(20)].join('\n'));
		const view = (await (await call(getLive, { key: shop.linkKey })).json()) as { run: unknown };
		expect(view.run).toMatchObject({
			turns: 20,
			onBobbin: 20,
			target: 200,
			left: 180,
			state: 'paused',
			question: null
		});
	});

	it('comes as a stream that says the newest, and beats', async () => {
		const stopper = new AbortController();
		const response = await call(getLive, {
			key: shop.linkKey,
			accept: 'text/event-stream',
			signal: stopper.signal
		});
		expect(response.headers.get('content-type')).toContain('text/event-stream');
		expect(response.headers.get('cache-control')).toBe('no-store, no-transform');
		expect(response.headers.get('x-accel-buffering')).toBe('no');
		const reader = response.body!.getReader();
		const next = async () => new TextDecoder().decode((await reader.read()).value);
		expect(await next()).toMatch(/^retry: \d+\n\nevent: beat\ndata: \{"at":\d+\}\n\n$/);
		expect(await next()).toMatch(/^event: live\nid: \d+\ndata: \{.*\}\n\n$/);
		// Not read meanwhile: only the last of these is told.
		for (let i = 0; i < 5; i++) await post(counter.tick(1));
		expect(JSON.parse((await next()).split('data: ')[1]!)).toMatchObject({ forward: 5 });
		app.live.beat();
		const beats: string[] = [];
		while (!beats.at(-1)?.startsWith('event: beat')) beats.push(await next());
		expect(beats.at(-1)).toMatch(/^event: beat\ndata: \{"at":\d+\}\n\n$/);
		stopper.abort();
		while (!(await reader.read()).done);
		expect(app.live.watchers(shop.id, shop.winderId)).toBe(0);
	});
});

describe('taps over HTTP', () => {
	beforeEach(async () => {
		await queueCoil(db, shop.id, 'neck', 20);
		await post([counter.hi(), ...counter.wind(20)].join('\n'));
	});

	it('keep a coil once, however often the same tap comes', async () => {
		const body = { id: randomUUID(), kind: 'set-aside', reason: 'a trial', ageMs: 0 };
		const first = await tap(body);
		expect(first.status).toBe(200);
		expect(await first.json()).toMatchObject({ ok: true, live: { winderId: shop.winderId } });
		const again = await tap(body);
		expect(again.status).toBe(200);
		const facts = await db.owner
			.selectFrom('fact')
			.select(['tap_id'])
			.where('winder_id', '=', shop.winderId)
			.where('tap_id', 'is not', null)
			.execute();
		expect(facts).toEqual([{ tap_id: body.id }]);
	});

	it('that mean nothing now are 409 with the reason and the state as it is', async () => {
		const body = await isProblem(await tap({ id: randomUUID(), kind: 'start', ageMs: 0 }), 409);
		expect(body).toMatchObject({ why: 'not-now', live: { run: { turns: 20 } } });
	});

	it('that do not fit name the field', async () => {
		const body = { id: randomUUID(), kind: 'keep', ageMs: 24 * 3_600_000 + 1 };
		expect(await isProblem(await tap(body), 422)).toMatchObject({ field: 'ageMs' });
		expect(await isProblem(await tap({ ...body, ageMs: 0, id: '7' }), 422)).toMatchObject({ field: 'id' });
		expect(await isProblem(await tap({ ...body, ageMs: 0, kind: 'go faster' }), 422)).toMatchObject({ field: 'kind' });
		await isProblem(await tap('no object'), 422);
	});

	it('are cleaned of what no record can hold', async () => {
		const body = { id: randomUUID(), kind: 'set-aside', reason: ' broken\u0000wire \ud800', ageMs: 0 };
		expect((await tap(body)).status).toBe(200);
		// The tap is placed once a line of a later moment has come.
		await post(counter.tick(0, 1500, 0));
		// The same tap in capitals is the same tap.
		expect((await tap({ ...body, id: body.id.toUpperCase() })).status).toBe(200);
		const run = await db.owner
			.selectFrom('run')
			.select('set_aside_reason')
			.where('workshop_id', '=', shop.id)
			.where('state', '=', 'set-aside')
			.execute();
		expect(run).toEqual([{ set_aside_reason: 'broken wire' }]);
		const nothing = { ...body, id: randomUUID(), reason: '\u0000\udfff' };
		expect(await isProblem(await tap(nothing), 422)).toMatchObject({ field: 'reason' });
	});

	it('need a session', async () => {
		expect((await tap({ id: randomUUID(), kind: 'keep', ageMs: 0 }, null)).status).toBe(401);
	});
});

describe('runs over HTTP', () => {
	async function wound(names: string[]): Promise<void> {
		for (const name of names) {
			await queueCoil(db, shop.id, name, 6);
			await app.ingest.queueChanged(shop.id);
			await post([counter.hi(), ...counter.wind(6)].join('\n'));
			await tap({ id: randomUUID(), kind: 'set-aside', reason: 'a trial', ageMs: 0 });
			// The tap is placed once a line of a later moment has come.
			await post(counter.tick(0, 1500, 0));
			// The coil is next again; it is taken out so that the next name is wound.
			await app.ingest.putBack(shop.id, shop.winderId);
			await db.owner.updateTable('coil').set({ state: 'removed' }).where('workshop_id', '=', shop.id).execute();
		}
	}

	it('come in pages, the last taken first', async () => {
		const winding = { workshop_id: shop.id, winder_id: shop.winderId };
		const coil = await queueCoil(db, shop.id, 'neck');
		for (let i = 0; i < 5; i++) {
			await db.owner
				.insertInto('run')
				.values({
					...winding,
					coil_id: coil.id,
					coil_name: `coil ${i}`,
					target: 100,
					look_every: 0,
					direction: 'clockwise',
					top_faces: 'out',
					tolerance_turns: 5,
					state: 'kept',
					taken_at: new Date(Date.UTC(2026, 0, 1 + i)),
					sticker: `S${i}`
				})
				.execute();
		}
		const page = async (search: string) =>
			(await (await call(getRuns, { as: { role: 'apprentice' }, search })).json()) as {
				runs: { name: string }[];
				nextCursor: string | null;
			};
		const names: string[] = [];
		let cursor: string | null = '';
		while (cursor !== null) {
			const got: Awaited<ReturnType<typeof page>> = await page(`?limit=2${cursor ? `&cursor=${cursor}` : ''}`);
			names.push(...got.runs.map((run) => run.name));
			cursor = got.nextCursor;
		}
		expect(names).toEqual(['coil 4', 'coil 3', 'coil 2', 'coil 1', 'coil 0']);
		const some = await page('?from=2026-01-02&to=2026-01-04T00:00:00Z&state=kept');
		expect(some.runs.map((run) => run.name)).toEqual(['coil 2', 'coil 1']);
		expect((await page('?q=S3')).runs.map((run) => run.name)).toEqual(['coil 3']);
		expect((await page('?q=%25')).runs).toEqual([]);
		expect((await page('?q=S%003')).runs).toEqual([]);
		expect((await page('?q=S3%00')).runs.map((run) => run.name)).toEqual(['coil 3']);
	});

	it('are refused a question that makes no sense, with the field', async () => {
		for (const [search, field] of [
			['?limit=0', 'limit'],
			['?limit=201', 'limit'],
			['?limit=many', 'limit'],
			['?from=yesterday', 'from'],
			['?state=lost', 'state'],
			['?cursor=abc', 'cursor']
		]) {
			const refused = await isProblem(await call(getRuns, { as: { role: 'owner' }, search: search! }), 422);
			expect(refused.field).toBe(field);
		}
		expect((await call(getRuns, {})).status).toBe(401);
	});

	it('tell one with its facts and trace, and nothing of another workshop’s', async () => {
		await wound(['neck']);
		const { runs } = (await (await call(getRuns, { as: { role: 'maker' }, search: '?state=set-aside' })).json()) as {
			runs: { id: string }[];
		};
		const id = runs[0]!.id;
		const run = await (await call(getRun, { as: { role: 'maker' }, run: id })).json();
		expect(run).toMatchObject({ name: 'neck', state: 'set-aside', turns: 6, setAsideReason: 'a trial' });
		expect(run.facts.map((fact: { kind: string }) => fact.kind)).toEqual(
			expect.arrayContaining(['taken', 'moved', 'stopped', 'set-aside'])
		);
		expect(run.trace.turns.at(-1)).toBe(6);
		await isProblem(await call(getRun, { as: { role: 'maker' }, run: randomUUID() }), 404);
		shop = await makeShop(db);
		await isProblem(await call(getRun, { as: { role: 'owner' }, run: id }), 404);
	});
});

describe('health', () => {
	it('is well with the right role and migrations', async () => {
		expect(await (await call(getHealth, {})).json()).toEqual({ status: 'ok' });
	});

	it('says why when the database is used as another role, lacks migrations or does not answer', async () => {
		const asOwner = makeTurnstead(connect(db.url, { onLost: () => {} }));
		expect(await asOwner.health()).toMatchObject({ ok: false, why: expect.stringContaining('not as turnstead_app') });
		await asOwner.stop();
		const nowhere = makeTurnstead(connect('postgres://nobody@127.0.0.1:9/none', { onLost: () => {} }));
		expect(await nowhere.health()).toMatchObject({ ok: false, why: expect.stringContaining('does not answer') });
		Reflect.set(globalThis, place, nowhere);
		const response = await call(getHealth, {});
		Reflect.set(globalThis, place, app);
		expect(response.status).toBe(503);
		expect(await response.json()).toMatchObject({ status: 'not ready', why: expect.any(String) });
		await nowhere.stop();
		Reflect.set(globalThis, place, app);
	});
});

describe('a database that is away', () => {
	it('is 503 with when to come again', async () => {
		const away = makeTurnstead(connect('postgres://nobody@127.0.0.1:9/none', { onLost: () => {} }));
		Reflect.set(globalThis, place, away);
		const response = await post(counter.hi());
		Reflect.set(globalThis, place, app);
		expect(response.headers.get('retry-after')).not.toBeNull();
		await isProblem(response, 503);
		await away.stop();
		Reflect.set(globalThis, place, app);
	});
});
