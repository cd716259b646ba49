/**
 * Where to go after signing in: a path of this host, or the start. An address that a browser could read as another
 * host's ("//else.where", "/\else.where") is not a path.
 */
export function wayBack(to: string | null): string {
	if (to === null || !/^\/(?![/\\])/.test(to)) return '/';
	const base = 'http://here.invalid';
	if (!URL.canParse(to, base)) return '/';
	const url = new URL(to, base);
	if (url.origin !== base || url.pathname.startsWith('//') || url.pathname === '/sign-in') return '/';
	return url.pathname + url.search;
}
