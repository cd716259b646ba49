import type { LiveView } from '../../winding/types.ts';
import type { LiveHub } from './hub.ts';

/** A browser that lost the stream asks again after this long; the bench screen has its own, jittered. */
const retryMs = 1_000;

/** Every so many beats it is asked whether the reader may still read: each ten seconds. */
const beatsPerCheck = 5;

const encoder = new TextEncoder();
// One winder may have many screens: its view is written out once.
const frames = new WeakMap<LiveView, Uint8Array>();

const beatFrame = () => `event: beat\ndata: ${JSON.stringify({ at: Date.now() })}\n\n`;

function frameOf(view: LiveView): Uint8Array {
	let frame = frames.get(view);
	if (!frame) {
		frame = encoder.encode(`event: live\nid: ${view.seq}\ndata: ${JSON.stringify(view)}\n\n`);
		frames.set(view, frame);
	}
	return frame;
}

/**
 * The live state of one winder as server-sent events: `live` with the whole LiveView, `beat` every two seconds with the
 * server's time. A reader that stalls holds one view, the newest, however many were published. `mayStill` is asked now and
 * then and ends the stream with false; while it cannot be answered the stream goes on.
 */
export function liveEventStream(
	hub: LiveHub,
	workshopId: string,
	winderId: string,
	signal: AbortSignal,
	mayStill: () => Promise<boolean>
): Response {
	const watcher = hub.open(workshopId, winderId, signal);
	let first = true;
	let beats = 0;
	const stream = new ReadableStream<Uint8Array>(
		{
			async pull(controller) {
				if (first) {
					first = false;
					// A beat first: the latest view may be long made, and by the beat's time a screen knows how long.
					controller.enqueue(encoder.encode(`retry: ${retryMs}\n\n${beatFrame()}`));
					return;
				}
				const watched = await watcher.next();
				if (watched.kind === 'ended') controller.close();
				else if (watched.kind === 'live') controller.enqueue(frameOf(watched.view));
				else {
					beats += 1;
					if (beats % beatsPerCheck === 0 && !(await mayStill().catch(() => true))) {
						watcher.end();
						controller.close();
					} else controller.enqueue(encoder.encode(beatFrame()));
				}
			},
			cancel() {
				watcher.end();
			}
		},
		// Nothing is taken from the slot before the socket asks for it.
		{ highWaterMark: 0 }
	);
	return new Response(stream, {
		headers: {
			'content-type': 'text/event-stream; charset=utf-8',
			'cache-control': 'no-store, no-transform',
			// Tells buffering reverse proxies to pass each event on at once.
			'x-accel-buffering': 'no'
		}
	});
}
