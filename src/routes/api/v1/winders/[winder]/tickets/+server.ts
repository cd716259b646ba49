import { json } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { notFound } from '$lib/server/problem';
import type { RequestHandler } from './$types';

/** A one-use ticket for a WebSocket of a browser, which can send no Authorization header: /api/v1/link?ticket=… */
export const POST: RequestHandler = async ({ locals, params }) => {
	const { workshopId } = guard(locals, 'bench.tap');
	const { ingest, keys } = turnstead();
	const view = await ingest.view(workshopId, params.winder);
	if (!view) return notFound();
	return json(keys.mintTicket({ workshopId, winderId: view.winderId }), { headers: { 'cache-control': 'no-store' } });
};
