import {
	error,
	redirect,
	type Handle,
	type HandleServerError,
	type RequestEvent,
	type ServerInit
} from '@sveltejs/kit';
import { building } from '$app/environment';
import { startTurnstead, turnstead } from '$lib/server/app';
import { asProblem, awayPage, harden } from '$lib/server/auth/answer';
import { mayWrite } from '$lib/server/auth/origin';
import { dropSession, hasSessionCookie, readSession } from '$lib/server/auth/session';
import { findMember, type Member } from '$lib/server/db/people';
import { problem } from '$lib/server/problem';

export const init: ServerInit = async () => {
	if (!building) await startTurnstead();
};

export const handle: Handle = async ({ event, resolve }) => {
	const api = event.url.pathname.startsWith('/api/v1/') || event.url.pathname === '/api/v1';
	const https = event.url.protocol === 'https:';
	const refuse = (status: number, words: string): Response => {
		if (api) return harden(problem(status, words), { https, personal: false });
		error(status, words);
	};

	if (!mayWrite(event.request, event.url.host)) {
		return refuse(
			403,
			'This came from a page of another address, so nothing was changed. Reload the page and try again.'
		);
	}
	event.locals.db = turnstead().db;
	event.locals.member = null;
	try {
		event.locals.member = await whoAsks(event);
	} catch (cause) {
		// The session is kept: the database being away signs nobody out.
		console.error('cannot look up who asks:', cause);
		const words = 'The database is away just now. You are still signed in and nothing was changed.';
		const page = event.request.method === 'GET' && !event.isDataRequest && !api;
		return page ? harden(awayPage(words), { https, personal: true }) : refuse(503, words);
	}
	if (needsMember(event) && !event.locals.member) redirect(303, signInAddress(event));

	const response = await resolve(event);
	return harden(api ? asProblem(response) : response, { https, personal: event.locals.member !== null });
};

/** The person sees a number, the log says what stands behind it. */
export const handleError: HandleServerError = ({ error: cause, event, status, message }) => {
	if (status < 500) return { message };
	const id = crypto.randomUUID().slice(0, 8);
	console.error(`${id}: ${event.request.method} ${event.route.id ?? event.url.pathname} failed:`, cause);
	return { message, id };
};

/** A cookie of someone who was removed, or whose sessions were ended, is taken away. */
async function whoAsks(event: RequestEvent): Promise<Member | null> {
	if (!hasSessionCookie(event)) return null;
	const claims = await readSession(event);
	const member = claims ? await findMember(event.locals.db, claims) : null;
	if (!member) dropSession(event);
	return member;
}

/** A layout's guard would not cover actions and endpoints (sveltejs/kit#6315), so the groups are guarded here. */
function needsMember(event: RequestEvent): boolean {
	return event.route.id !== null && /^\/\((workshop|bench)\)(\/|$)/.test(event.route.id);
}

/** Back to the page afterwards; what was posted is not posted again. */
function signInAddress(event: RequestEvent): string {
	const to = event.request.method === 'GET' ? event.url.pathname + event.url.search : event.url.pathname;
	return to === '/' ? '/sign-in' : `/sign-in?to=${encodeURIComponent(to)}`;
}
