/** Refusals of the API as RFC 9457 problem details. */

const titles: Record<number, string> = {
	400: 'Bad request',
	401: 'Sign in, or send the link key',
	403: 'Not allowed',
	404: 'Not found',
	405: 'Method not allowed',
	409: 'Not now',
	413: 'Too much at once',
	415: 'Unsupported media type',
	422: 'Not a sensible value',
	429: 'Too many',
	500: 'Something went wrong here',
	503: 'Cannot save just now'
};

export interface ProblemMore {
	/** Machine-readable reason, an extension member. */
	why?: string;
	/** Other extension members, such as the field and the limit. */
	[member: string]: unknown;
}

/**
 * A problem+json answer.
 * @param detail one or two plain sentences: what happened, what was kept, what to do.
 */
export function problem(status: number, detail: string, more: ProblemMore = {}, headers: HeadersInit = {}): Response {
	const body = { type: 'about:blank', title: titles[status] ?? 'Refused', status, detail, ...more };
	const all = new Headers(headers);
	all.set('content-type', 'application/problem+json');
	all.set('cache-control', 'no-store');
	return new Response(JSON.stringify(body), { status, headers: all });
}

/** The one 404 of the API: an unknown id and another workshop's look the same. */
export function notFound(): Response {
	return problem(404, 'There is nothing here under that address.');
}
