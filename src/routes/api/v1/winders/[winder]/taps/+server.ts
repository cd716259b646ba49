import { json } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { away } from '$lib/server/ingest/request';
import type { TapAnswer } from '$lib/server/ingest/types';
import { notFound, problem } from '$lib/server/problem';
import type { TapRefusal } from '$lib/winding/types';
import type { RequestHandler } from './$types';
import { tapBody } from './tap-body';

/** Short: they stand on the bench in its near line. */
const sentences: Record<TapRefusal, string> = {
	'no-run': 'No coil on this bench.',
	turning: 'Stop the spindle first.',
	'not-now': 'Not now; nothing was changed.',
	'too-late': 'Too late to undo; it stays kept.',
	range: 'Outside what was wound.'
};

/** One tap on the bench. The same id again is answered as the first time and changes nothing. */
export const POST: RequestHandler = async ({ locals, params, request }) => {
	const member = guard(locals, 'bench.tap');
	const parsed = tapBody.safeParse(await request.json().catch(() => undefined));
	if (!parsed.success) {
		const issue = parsed.error.issues[0];
		const field = issue?.path.join('.') ?? '';
		return problem(422, `${field || 'The body'} does not fit: ${issue?.message}. Nothing was changed.`, { field });
	}
	const { ageMs, ...tap } = parsed.data;
	let answer: TapAnswer;
	try {
		const made = { ...tap, memberId: member.id };
		answer = await turnstead().ingest.tap(member.workshopId, params.winder, made, ageMs);
	} catch (error) {
		console.error('a tap could not be taken:', error);
		return away();
	}
	if (answer.ok) return json({ ok: true, pending: answer.pending, live: answer.live });
	if (answer.why === 'not-found') return notFound();
	if (answer.why === 'not-saved') {
		return problem(
			503,
			'The tap is noted but not saved yet. Send it again with the same id.',
			{ why: 'not-saved' },
			{
				'retry-after': String(answer.retryAfterS)
			}
		);
	}
	return problem(409, sentences[answer.why], { why: answer.why, live: answer.live });
};
