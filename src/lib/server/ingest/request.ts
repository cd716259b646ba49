import { httpBytesMax, httpLinesMax } from '../../turnline/index.ts';
import { canonicalId } from '../db/ids.ts';
import { notFound, problem } from '../problem.ts';
import { bearerOf, type LinkKeys } from './keys.ts';
import type { Carrier, WinderRef } from './types.ts';

const carriers: Record<string, Carrier> = { 'text/plain': 'http', 'application/x-ndjson': 'ndjson' };

/** The winder that sends, by its link key; else the refusal. The key of one winder does not open another. */
export async function senderOf(
	request: Request,
	winderId: string,
	keys: LinkKeys
): Promise<{ ok: true; ref: WinderRef } | { ok: false; refusal: Response }> {
	const linkKey = bearerOf(request.headers.get('authorization'));
	if (linkKey === null) return { ok: false, refusal: noKey() };
	let ref: WinderRef | null;
	try {
		ref = await keys.find(linkKey);
	} catch {
		return { ok: false, refusal: away() };
	}
	if (!ref) return { ok: false, refusal: noKey() };
	if (ref.winderId !== canonicalId(winderId)) return { ok: false, refusal: notFound() };
	return { ok: true, ref };
}

/** The lines of a body, one each, without judging them; else the refusal. */
export async function linesOf(
	request: Request
): Promise<{ ok: true; lines: string[]; carrier: Carrier } | { ok: false; refusal: Response }> {
	const type = (request.headers.get('content-type') ?? '').split(';')[0]?.trim().toLowerCase() ?? '';
	const carrier = carriers[type];
	if (!carrier) {
		const detail = 'Send the lines as text/plain, one line each, or as application/x-ndjson. Nothing was taken in.';
		return { ok: false, refusal: problem(415, detail, {}, { accept: Object.keys(carriers).join(', ') }) };
	}
	const body = await readUpTo(request, httpBytesMax);
	if (body === null) return { ok: false, refusal: tooMuch() };
	// A byte a character in text: a line is measured in bytes, and whatever is not ASCII is refused line by line.
	const text = body.toString(carrier === 'http' ? 'latin1' : 'utf8');
	const lines = text.split('\n');
	if (lines.at(-1) === '') lines.pop();
	if (lines.length > httpLinesMax) return { ok: false, refusal: tooMuch() };
	return { ok: true, lines, carrier };
}

async function readUpTo(request: Request, bytesMax: number): Promise<Buffer | null> {
	if (Number(request.headers.get('content-length') ?? 0) > bytesMax) return null;
	const chunks: Uint8Array[] = [];
	let bytes = 0;
	const reader = request.body?.getReader();
	while (reader) {
		const { done, value } = await reader.read();
		if (done) break;
		bytes += value.byteLength;
		if (bytes > bytesMax) {
			await reader.cancel();
			return null;
		}
		chunks.push(value);
	}
	return Buffer.concat(chunks);
}

export function tooMuch(): Response {
	return problem(
		413,
		`At most ${httpLinesMax} lines and ${httpBytesMax / 1024} KiB go in one request. Nothing was taken in: send fewer at once.`,
		{ linesMax: httpLinesMax, bytesMax: httpBytesMax }
	);
}

/** The database is away and nothing can be answered. */
export function away(retryAfterS = 2): Response {
	return problem(
		503,
		'It cannot be saved just now. Nothing was acknowledged: keep it and send it again.',
		{},
		{ 'retry-after': String(retryAfterS) }
	);
}

function noKey(): Response {
	return problem(
		401,
		'No winder has this link key. Send it as "Authorization: Bearer <link key>".',
		{},
		{
			'www-authenticate': 'Bearer'
		}
	);
}
