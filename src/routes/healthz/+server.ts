import { json } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import type { RequestHandler } from './$types';

/** For whoever watches over the server: whether the database and its migrations are as this code needs them. */
export const GET: RequestHandler = async () => {
	const health = await turnstead().health();
	const headers = { 'cache-control': 'no-store' };
	if (health.ok) return json({ status: 'ok' }, { headers });
	return json({ status: 'not ready', why: health.why }, { status: 503, headers });
};
