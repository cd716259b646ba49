import { error, json } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { linkNow } from '../link-now.server';
import type { RequestHandler } from './$types';

/** What the page of a winder asks for while it is open. */
export const GET: RequestHandler = async ({ locals, params }) => {
	const { workshopId } = guard(locals, 'winder.see');
	const now = await linkNow(workshopId, params.winder);
	if (!now) error(404, 'There is no such winder.');
	return json(now, { headers: { 'cache-control': 'no-store' } });
};
