import type { Cookies, RequestEvent } from '@sveltejs/kit';
import { afterAll, beforeAll, beforeEach, describe, expect, it, vi } from 'vitest';
import { hashPassword } from '../../src/lib/server/auth/passwords.ts';
import { dropSession, hasSessionCookie, openSession, readSession } from '../../src/lib/server/auth/session.ts';
import { insertMemberWithPassword, insertWorkshop } from '../../src/lib/server/db/admin.ts';
import { provideServerEnv } from '../../src/lib/server/env.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

interface Kept {
	value: string;
	options: Parameters<Cookies['set']>[2];
}

/** A browser as far as cookies go. */
class Browser {
	readonly kept = new Map<string, Kept>();
	clientAddress = '192.0.2.1';

	constructor(readonly origin = 'http://workshop.lan:4173') {}

	/** A request of this browser, with `headers` that somebody in between could have added. */
	ask(headers: Record<string, string> = {}): RequestEvent {
		const { kept } = this;
		const cookies: Cookies = {
			get: (name) => kept.get(name)?.value,
			getAll: () => [...kept].map(([name, { value }]) => ({ name, value })),
			set: (name, value, options) => {
				if (value === '' || options.maxAge === 0) kept.delete(name);
				else kept.set(name, { value, options });
			},
			delete: (name) => void kept.delete(name),
			serialize: () => ''
		};
		const url = new URL('/sign-in', this.origin);
		const event: Partial<RequestEvent> = {
			url,
			request: new Request(url, { headers }),
			cookies,
			locals: { db: db.app, member: null } as App.Locals,
			getClientAddress: () => this.clientAddress
		};
		return event as RequestEvent;
	}
}

const email = 'ada@hollow-lane.example';
const password = 'copper kettle on the hob';
let db: TestDatabase;
let claims: { workshopId: string; memberId: string; epoch: number };

beforeAll(async () => {
	db = await freshDatabase();
	provideServerEnv({ databaseUrl: db.url, authSecret: 'a secret of forty-three characters, for tests' });
	const workshopId = await insertWorkshop(db.owner, { shortName: 'hollow', name: 'Hollow Lane', timeZone: 'UTC' });
	const passwordHash = await hashPassword(password);
	await insertMemberWithPassword(db.owner, workshopId, { name: 'Ada Quill', email, role: 'owner', passwordHash });
	const { id } = await db.owner.selectFrom('member').select('id').executeTakeFirstOrThrow();
	claims = { workshopId, memberId: id, epoch: 0 };
});
afterAll(async () => {
	await db.drop();
});
beforeEach(() => {
	vi.useRealTimers();
});

describe('a session cookie', () => {
	it('holds who signed in, and nothing that can be read in it', async () => {
		const browser = new Browser();
		expect(await openSession(browser.ask(), ' Ada@Hollow-Lane.example', password)).toEqual({ ok: true });
		expect(await readSession(browser.ask())).toMatchObject(claims);
		expect([...browser.kept.keys()]).toEqual(['turnstead.session']);
		const parts = browser.kept.get('turnstead.session')!.value.split('.');
		expect(parts.map((part) => Buffer.from(part, 'base64url').toString('latin1')).join()).not.toContain(
			claims.memberId
		);
	});
	it('is out of reach of scripts and other sites, and over https never sent in clear', async () => {
		const [plain, safe] = [new Browser(), new Browser('https://workshop.lan')];
		await openSession(plain.ask(), email, password);
		await openSession(safe.ask(), email, password);
		const shared = { httpOnly: true, sameSite: 'lax', path: '/' };
		expect(plain.kept.get('turnstead.session')?.options).toMatchObject({ ...shared, secure: false });
		expect(safe.kept.get('__Secure-turnstead.session')?.options).toMatchObject({ ...shared, secure: true });
	});
	it('changed by one character is no session, and is taken away', async () => {
		const browser = new Browser();
		await openSession(browser.ask(), email, password);
		const cookie = browser.kept.get('turnstead.session')!;
		const middle = Math.floor(cookie.value.length / 2);
		const other = cookie.value[middle] === 'A' ? 'B' : 'A';
		cookie.value = cookie.value.slice(0, middle) + other + cookie.value.slice(middle + 1);
		const event = browser.ask();
		expect(hasSessionCookie(event)).toBe(true);
		expect(await readSession(event)).toBeNull();
		dropSession(event);
		expect(browser.kept.size).toBe(0);
	});
	it('is not written again at every answer, which could undo a sign-out in another tab', async () => {
		const browser = new Browser();
		await openSession(browser.ask(), email, password);
		const first = browser.kept.get('turnstead.session')!.value;
		await readSession(browser.ask());
		expect(browser.kept.get('turnstead.session')!.value).toBe(first);
	});
	it('is written again after a day, and ends when nobody comes for thirty', async () => {
		const browser = new Browser();
		await openSession(browser.ask(), email, password);
		const first = browser.kept.get('turnstead.session')!.value;
		const day = 24 * 3600_000;
		const start = Date.now();
		vi.useFakeTimers({ toFake: ['Date'], now: start + day + 60_000 });
		expect(await readSession(browser.ask())).toMatchObject(claims);
		const second = browser.kept.get('turnstead.session')!.value;
		expect(second).not.toBe(first);
		vi.setSystemTime(start + 30.5 * day);
		expect(await readSession(browser.ask())).toMatchObject(claims);
		browser.kept.get('turnstead.session')!.value = first;
		expect(await readSession(browser.ask())).toBeNull();
	});
	it('is judged by the address asked, whatever a header claims and whatever else is in the jar', async () => {
		const browser = new Browser();
		await openSession(browser.ask({ 'x-forwarded-proto': 'https' }), email, password);
		browser.kept.set('authjs.callback-url', { value: 'no address at all', options: { path: '/' } });
		expect([...browser.kept.keys()]).toContain('turnstead.session');
		expect(await readSession(browser.ask({ 'x-forwarded-host': ':::', 'x-forwarded-proto': '?' }))).toMatchObject(
			claims
		);
	});
});

describe('signing in', () => {
	it('refuses a wrong password, an unknown address and an empty form alike', async () => {
		const browser = new Browser();
		browser.clientAddress = '192.0.2.2';
		const tries: [string, string][] = [
			[email, 'copper kettle on the hop'],
			['nobody@hollow-lane.example', password],
			['', '']
		];
		for (const [address, typed] of tries) {
			expect(await openSession(browser.ask(), address, typed)).toEqual({ ok: false, why: 'wrong' });
		}
		expect(browser.kept.size).toBe(0);
	});
	it('makes one who guesses at an account wait, with the right password too, and lets the others in', async () => {
		await insertMemberWithPassword(db.owner, claims.workshopId, {
			name: 'Bo Reed',
			email: 'bo@hollow-lane.example',
			role: 'maker',
			passwordHash: await hashPassword(password)
		});
		const browser = new Browser();
		browser.clientAddress = '192.0.2.3';
		const guess = (typed: string) => openSession(browser.ask(), 'bo@hollow-lane.example', typed);
		for (let i = 0; i < 10; i++) expect(await guess('wrong wrong wrong wrong')).toEqual({ ok: false, why: 'wrong' });
		expect(await guess(password)).toMatchObject({ ok: false, why: 'limited', waitMs: expect.any(Number) });
		expect(await openSession(browser.ask(), email, password)).toEqual({ ok: true });
	});
	it('makes one place that tries a list of addresses wait', async () => {
		const browser = new Browser();
		browser.clientAddress = '192.0.2.4';
		const outcomes = [];
		for (let i = 0; i < 51; i++) outcomes.push(await openSession(browser.ask(), `p${i}@else.example`, password));
		expect(outcomes.slice(0, 50).every((outcome) => !outcome.ok && outcome.why === 'wrong')).toBe(true);
		expect(outcomes[50]).toMatchObject({ ok: false, why: 'limited' });
	});
});
