import { problem } from '../problem.ts';

/** Headers of every answer. The Content-Security-Policy of pages comes from svelte.config.js, with a nonce each. */
export function harden(response: Response, facts: { https: boolean; personal: boolean }): Response {
	const set = (name: string, value: string) => {
		if (!response.headers.has(name)) response.headers.set(name, value);
	};
	// "same-origin", not "no-referrer": with that, browsers send "Origin: null" with our own forms.
	set('referrer-policy', 'same-origin');
	set('x-content-type-options', 'nosniff');
	// Over plain http from the network browsers ignore it, and complain on every page.
	if (facts.https) set('cross-origin-opener-policy', 'same-origin');
	set('cross-origin-resource-policy', 'same-origin');
	set(
		'permissions-policy',
		'screen-wake-lock=(self), serial=(self), fullscreen=(self), camera=(), microphone=(), geolocation=(), payment=(), usb=()'
	);
	set('content-security-policy', "default-src 'none'; frame-ancestors 'none'; base-uri 'none'; form-action 'none'");
	// Half a year, this host alone: a workshop that gives up its certificate is not locked out for ever.
	if (facts.https) set('strict-transport-security', 'max-age=15768000');
	if (facts.personal) set('cache-control', 'private, no-store');
	return response;
}

const details: Record<number, string> = {
	401: 'Nobody is signed in here. Sign in, or send the link key of the winder.',
	403: 'This is not allowed with this role or key. Nothing was changed.',
	404: 'There is nothing here under that address.',
	405: 'This address does not take that method.',
	413: 'The body is larger than this address takes. Nothing of it was kept.',
	415: 'This address does not take that type of body.'
};

/**
 * Every refusal of the API is problem+json (RFC 9457): the framework's plain texts for 403, 404, 405, 413 and 500
 * become one, and a redirect to the sign-in page becomes 401, because a program cannot fill in a form.
 */
export function asProblem(response: Response): Response {
	const type = response.headers.get('content-type') ?? '';
	if (type.startsWith('application/problem+json')) return challenged(response);
	if (response.status >= 300 && response.status < 400 && response.status !== 304) {
		if (!(response.headers.get('location') ?? '').startsWith('/sign-in')) return response;
		return challenged(problem(401, details[401]!, {}, kept(response)));
	}
	if (response.status < 400) return response;
	const detail = details[response.status] ?? 'Something went wrong here. Nothing of this request was kept.';
	return challenged(problem(response.status, detail, {}, kept(response)));
}

/** A 401 must say how to prove who one is (RFC 9110, 15.5.2). */
function challenged(response: Response): Response {
	if (response.status === 401 && !response.headers.has('www-authenticate')) {
		response.headers.set('www-authenticate', 'Bearer realm="Turnstead"');
	}
	return response;
}

function kept(response: Response): Headers {
	const headers = new Headers();
	for (const name of ['allow', 'retry-after']) {
		const value = response.headers.get(name);
		if (value !== null) headers.set(name, value);
	}
	for (const cookie of response.headers.getSetCookie()) headers.append('set-cookie', cookie);
	return headers;
}

/** How long a browser waits before it asks again for a page that could not be made. */
const AWAY_S = 5;

/** A page without anything of ours but words, for when the database is away; the browser asks again by itself. */
export function awayPage(words: string): Response {
	const body = `<!doctype html><html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1"><title>Not just now · Turnstead</title></head><body><h1>Not just now</h1><p>${words}</p><p>This page asks again every ${AWAY_S} seconds.</p></body></html>`;
	const headers = { 'content-type': 'text/html; charset=utf-8', 'retry-after': `${AWAY_S}`, refresh: `${AWAY_S}` };
	return new Response(body, { status: 503, headers });
}
