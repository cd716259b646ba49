import { json } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { readSession } from '$lib/server/auth/session';
import { findMember } from '$lib/server/db/people';
import { away, senderOf } from '$lib/server/ingest/request';
import { liveEventStream } from '$lib/server/live/event-stream';
import { notFound } from '$lib/server/problem';
import type { RequestHandler } from './$types';

/** The live state of a winder, for a member or the winder itself: JSON, or with Accept: text/event-stream the stream. */
export const GET: RequestHandler = async (event) => {
	const { locals, params, request } = event;
	const { ingest, keys, live } = turnstead();
	const byKey = request.headers.has('authorization');
	const sender = byKey ? await senderOf(request, params.winder, keys) : null;
	if (sender && !sender.ok) return sender.refusal;
	const workshopId = sender ? sender.ref.workshopId : guard(locals, 'live.read').workshopId;

	const view = await ingest.view(workshopId, params.winder).catch((error) => {
		console.error('a winder could not be read:', error);
		return undefined;
	});
	if (view === undefined) return away();
	if (view === null) return notFound();
	// To HEAD a stream would be an answer without an end.
	if (request.method === 'GET' && (request.headers.get('accept') ?? '').includes('text/event-stream')) {
		// Asked again while the stream is open: who was removed or signed out everywhere sees no more.
		const claims = byKey ? null : await readSession(event);
		const mayStill = async () =>
			byKey
				? (await senderOf(request, params.winder, keys)).ok
				: claims !== null && (await findMember(locals.db, claims)) !== null;
		return liveEventStream(live, workshopId, view.winderId, request.signal, mayStill);
	}
	return json(view, { headers: { 'cache-control': 'no-store' } });
};
