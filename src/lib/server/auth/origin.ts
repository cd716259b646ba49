/**
 * Whether a request may change something, judged by where it comes from.
 *
 * A page of another origin must not act with a member's cookie or sign somebody in (CSRF). There is no fixed list of
 * origins: a tablet reaches the same machine by another name or address, so the Origin's host must equal the Host the
 * request was sent to. The host is compared, not the scheme: behind a proxy that ends TLS the scheme here is http.
 */
export function mayWrite(request: Request, host: string): boolean {
	if (request.method === 'GET' || request.method === 'HEAD' || request.method === 'OPTIONS') return true;
	const { headers } = request;
	const cookie = headers.has('cookie');
	// A link key in a header is no cookie: no browser adds it for a foreign page.
	if (!cookie && /^bearer /i.test(headers.get('authorization') ?? '')) return true;
	const site = headers.get('sec-fetch-site');
	// "none" is the person's own doing, such as a reload.
	if (site !== null && site !== 'same-origin' && site !== 'none') return false;
	const origin = headers.get('origin');
	if (origin !== null) return hostOf(origin) === host.toLowerCase();
	// Every browser of the last years sends one of the two with a write. A program without cookies has nothing to abuse.
	return site !== null || !cookie;
}

function hostOf(origin: string): string | null {
	return URL.canParse(origin) ? new URL(origin).host : null;
}
