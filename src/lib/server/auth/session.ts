import { SvelteKitAuth, CredentialsSignin, type SvelteKitAuthConfig } from '@auth/sveltekit';
import Credentials from '@auth/sveltekit/providers/credentials';
import type { Cookies, RequestEvent } from '@sveltejs/kit';
import { findSignIn, normaliseEmail, type SessionClaims } from '../db/people.ts';
import { env } from '../env.ts';
import { accountAttempts, addressAttempts, clientKey } from './attempts.ts';
import { verifyPassword } from './passwords.ts';

/**
 * Sessions are Auth.js JWTs in an encrypted cookie: a Credentials provider knows no other kind. The cookie carries the
 * member, the workshop and the session epoch; hooks.server.ts compares them with the database at every request, so
 * removal and sign-out everywhere act at once.
 *
 * Auth.js serves no address of its own here (its pages and its /auth/… endpoints would go round our checks and limits);
 * it is called from our actions only.
 */

/** Idle this long, a session ends. A tablet at the bench is used weekly, not daily. */
const SESSION_S_MAX = 30 * 24 * 3600;
/** The cookie is written again after this long, not at every answer, which could undo a sign-out in another tab. */
const SESSION_REFRESH_S = 24 * 3600;

const cookieNames = { http: 'turnstead.session', https: '__Secure-turnstead.session' };

class Limited extends CredentialsSignin {
	override code = 'limited';
	constructor(readonly waitMs: number) {
		super('too many attempts');
	}
}

class WrongPassword extends CredentialsSignin {
	override code = 'wrong';
}

declare module '@auth/sveltekit' {
	interface Session {
		claims?: SessionClaims & { issuedAtS: number };
	}
	interface User {
		claims?: SessionClaims;
	}
}

function config(event: RequestEvent): SvelteKitAuthConfig {
	const secure = event.url.protocol === 'https:';
	return {
		secret: env().authSecret,
		trustHost: true,
		useSecureCookies: secure,
		session: { strategy: 'jwt', maxAge: SESSION_S_MAX },
		pages: { signIn: '/sign-in', error: '/sign-in' },
		cookies: {
			sessionToken: {
				name: secure ? cookieNames.https : cookieNames.http,
				options: { httpOnly: true, sameSite: 'lax', path: '/', secure }
			}
		},
		logger: {
			// A wrong password and an outdated cookie are daily events; anything else is worth a line.
			error(cause) {
				if (cause instanceof CredentialsSignin || cause.name === 'JWTSessionError') return;
				console.error('sign-in failed unexpectedly:', cause);
			}
		},
		providers: [
			Credentials({
				credentials: { email: {}, password: {} },
				authorize: async ({ email, password }) => {
					if (typeof email !== 'string' || typeof password !== 'string') throw new WrongPassword();
					const claims = await checkPassword(event, email, password);
					return { id: claims.memberId, claims };
				}
			})
		],
		callbacks: {
			jwt({ token, user }) {
				const claims = user?.claims;
				if (!claims) return token;
				return { w: claims.workshopId, m: claims.memberId, e: claims.epoch };
			},
			session({ session, token }) {
				const { w, m, e, iat } = token;
				if (typeof w === 'string' && typeof m === 'string' && typeof e === 'number') {
					session.claims = { workshopId: w, memberId: m, epoch: e, issuedAtS: iat ?? 0 };
				}
				return session;
			}
		}
	};
}

/** Throws Limited or WrongPassword. An unknown address takes the same way and the same time as a wrong password. */
async function checkPassword(event: RequestEvent, email: string, password: string): Promise<SessionClaims> {
	const account = normaliseEmail(email).slice(0, 254);
	const now = Date.now();
	const waitMs = addressAttempts.take(clientKey(event.getClientAddress()), now) || accountAttempts.take(account, now);
	if (waitMs > 0) throw new Limited(waitMs);
	const found = await findSignIn(event.locals.db, account);
	const right = await verifyPassword(found?.passwordHash ?? null, password);
	if (!found || !right) throw new WrongPassword();
	accountAttempts.forget(account);
	return { workshopId: found.workshopId, memberId: found.memberId, epoch: found.epoch };
}

const authJs = SvelteKitAuth(async (event) => config(event as RequestEvent));

/**
 * The event as Auth.js may see it: this request's host and scheme (it would believe any X-Forwarded-… header), the
 * session cookie and no other (one foreign callback cookie fails its check of the configuration), and a way to write
 * that same cookie alone.
 */
function narrowed(event: RequestEvent, body: FormData | null, write: Cookies['set']): RequestEvent {
	const name = cookieNames[event.url.protocol === 'https:' ? 'https' : 'http'];
	const headers = new Headers({ host: event.url.host, 'x-forwarded-proto': event.url.protocol.slice(0, -1) });
	const sent = event.cookies
		.getAll()
		.filter((cookie) => isSessionCookie(cookie.name, name))
		.map((cookie) => `${cookie.name}=${cookie.value}`);
	if (sent.length > 0) headers.set('cookie', sent.join('; '));
	const request = new Request(event.url, body ? { method: 'POST', headers, body } : { headers });
	const cookies: Cookies = {
		...event.cookies,
		set: (cookie, value, options) => {
			if (isSessionCookie(cookie, name)) write(cookie, value, options);
		}
	};
	// Its handle keeps what it puts into locals, so it gets its own.
	return { ...event, request, cookies, locals: { ...event.locals } };
}

/** The cookie, or a numbered piece of it when it was too long for one. */
function isSessionCookie(cookie: string, name: string): boolean {
	return cookie === name || (cookie.startsWith(`${name}.`) && /^\d+$/.test(cookie.slice(name.length + 1)));
}

export function hasSessionCookie(event: RequestEvent): boolean {
	const name = cookieNames[event.url.protocol === 'https:' ? 'https' : 'http'];
	return event.cookies.getAll().some((cookie) => isSessionCookie(cookie.name, name));
}

/** What the session cookie claims, or null when there is none that can be read. Not yet compared with the database. */
export async function readSession(event: RequestEvent): Promise<SessionClaims | null> {
	const written: Parameters<Cookies['set']>[] = [];
	const narrow = narrowed(event, null, (...args) => written.push(args));
	await authJs.handle({ event: narrow, resolve: async () => new Response() });
	const claims = (await narrow.locals.auth())?.claims;
	if (!claims) return null;
	if (Date.now() / 1000 - claims.issuedAtS > SESSION_REFRESH_S) {
		for (const args of written) event.cookies.set(...args);
	}
	return claims;
}

/** Takes the session cookie away from the browser. */
export function dropSession(event: RequestEvent): void {
	for (const { name } of event.cookies.getAll()) {
		const ours = Object.values(cookieNames).some((own) => isSessionCookie(name, own));
		if (ours) event.cookies.delete(name, { path: '/', secure: event.url.protocol === 'https:' });
	}
}

export type SignInOutcome = { ok: true } | { ok: false; why: 'wrong' } | { ok: false; why: 'limited'; waitMs: number };

/** Checks address and password, counts the attempt, and on success puts the session cookie into the answer. */
export async function openSession(event: RequestEvent, email: string, password: string): Promise<SignInOutcome> {
	const form = new FormData();
	form.set('providerId', 'credentials');
	form.set('email', email);
	form.set('password', password);
	// Empty means: do not redirect; our action says where to go.
	form.set('redirect', '');
	const narrow = narrowed(event, form, (...args) => event.cookies.set(...args));
	try {
		await authJs.signIn(narrow);
		return { ok: true };
	} catch (cause) {
		if (cause instanceof Limited) return { ok: false, why: 'limited', waitMs: cause.waitMs };
		if (cause instanceof WrongPassword) return { ok: false, why: 'wrong' };
		throw cause;
	}
}

/** Checks the password of someone who is signed in, with the same count of attempts. */
export async function confirmPassword(event: RequestEvent, email: string, password: string): Promise<SignInOutcome> {
	try {
		await checkPassword(event, email, password);
		return { ok: true };
	} catch (cause) {
		if (cause instanceof Limited) return { ok: false, why: 'limited', waitMs: cause.waitMs };
		if (cause instanceof WrongPassword) return { ok: false, why: 'wrong' };
		throw cause;
	}
}
