import { json } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { windNow } from '../benches.server';
import type { RequestHandler } from './$types';

/** What the page of benches and queue asks for every few seconds: one request, however many winders there are. */
export const GET: RequestHandler = async ({ locals }) => {
	const member = guard(locals, 'queue.see');
	return json(await windNow(locals.db, member.workshopId), { headers: { 'cache-control': 'no-store' } });
};
