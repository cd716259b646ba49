import { json } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { away, senderOf } from '$lib/server/ingest/request';
import { liveEventStream } from '$lib/server/live/event-stream';
import { notFound } from '$lib/server/problem';
import type { RequestHandler } from './$types';

/** The live state of a winder, for a member or the winder itself: JSON, or with Accept: text/event-stream the stream. */
export const GET: RequestHandler = async ({ locals, params, request }) => {
	const { ingest, keys, live } = turnstead();
	let workshopId: string;
	if (request.headers.has('authorization')) {
		const sender = await senderOf(request, params.winder, keys);
		if (!sender.ok) return sender.refusal;
		workshopId = sender.ref.workshopId;
	} else workshopId = guard(locals, 'live.read').workshopId;

	const view = await ingest.view(workshopId, params.winder).catch((error) => {
		console.error('a winder could not be read:', error);
		return undefined;
	});
	if (view === undefined) return away();
	if (view === null) return notFound();
	// To HEAD a stream would be an answer without an end.
	if (request.method === 'GET' && (request.headers.get('accept') ?? '').includes('text/event-stream')) {
		return liveEventStream(live, workshopId, view.winderId, request.signal);
	}
	return json(view, { headers: { 'cache-control': 'no-store' } });
};
