import { json } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { away, linesOf, senderOf, tooMuch } from '$lib/server/ingest/request';
import type { Received } from '$lib/server/ingest/types';
import { notFound, problem } from '$lib/server/problem';
import { burstLinesMax, linesPerSecondMax } from '$lib/turnline';
import type { RequestHandler } from './$types';

/** Lines of a winder over HTTP; see firmware-protocol/PROTOCOL.md. */
export const POST: RequestHandler = async ({ params, request }) => {
	const receivedAt = Date.now();
	const { ingest, keys } = turnstead();
	const sender = await senderOf(request, params.winder, keys);
	if (!sender.ok) return sender.refusal;
	const body = await linesOf(request);
	if (!body.ok) return body.refusal;
	let received: Received;
	try {
		received = await ingest.receive(sender.ref, body.lines, body.carrier, receivedAt);
	} catch (error) {
		console.error('lines could not be taken in:', error);
		return away();
	}
	return received.ok ? answer(received) : refusal(received);
};

function answer({ ack, stored, thinned, duplicate, rejected, commands, retryMs }: Received & { ok: true }): Response {
	const body = { ack, stored, thinned, duplicate, rejected, commands, retryMs };
	return json(body, { headers: { 'cache-control': 'no-store' } });
}

function refusal(received: Received & { ok: false }): Response {
	switch (received.why) {
		case 'not-found':
			return notFound();
		case 'nothing-parsed':
			return problem(400, 'None of the lines could be read, and nothing was taken in. Each says why.', {
				rejected: received.rejected
			});
		case 'too-many-lines':
			return tooMuch();
		case 'rate':
			return problem(
				429,
				`More lines than ${linesPerSecondMax} a second for long, or ${burstLinesMax} at once. ` +
					'None of these was taken in: keep them and send them again.',
				{ linesPerSecond: linesPerSecondMax, burstLines: burstLinesMax },
				{ 'retry-after': String(received.retryAfterS) }
			);
		case 'not-saved':
			return away(received.retryAfterS);
	}
}
