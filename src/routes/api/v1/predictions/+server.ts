import { json } from '@sveltejs/kit';
import { answerPrediction, predictionRequest } from '$lib/coil/prediction-schema';
import { Attempts, clientKey, waitInWords } from '$lib/server/auth/attempts';
import { problem } from '$lib/server/problem';
import type { RequestHandler } from './$types';

/** A prediction takes some milliseconds of computing and nobody has to sign in for it: two a second from one place. */
const predictionAttempts = new Attempts({ attemptsMax: 120, windowMs: 60_000, keysMax: 10_000 });
/** A request is some hundred characters. */
const bodyCharsMax = 16_384;

interface FieldProblem {
	field: string;
	detail: string;
	min?: number;
	max?: number;
}

/** What a coil will measure, how it fills its bobbin and how it rings, with how sure each figure is. */
export const POST: RequestHandler = async ({ request, getClientAddress }) => {
	const waitMs = predictionAttempts.take(clientKey(getClientAddress()), Date.now());
	if (waitMs > 0) {
		return problem(429, `That was many predictions from one place. Wait ${waitInWords(waitMs)}.`, undefined, {
			'retry-after': String(Math.ceil(waitMs / 1000))
		});
	}
	const text = await request.text();
	if (text.length > bodyCharsMax) return problem(413, `A request has at most ${bodyCharsMax} characters.`);
	let typed: unknown;
	try {
		typed = JSON.parse(text);
	} catch {
		return problem(400, 'The body is not JSON.');
	}

	const parsed = predictionRequest.safeParse(typed);
	if (!parsed.success) {
		return refused(
			parsed.error.issues.map((issue) => ({
				field: issue.path.join('.') || 'body',
				detail: issue.message,
				...('minimum' in issue && { min: Number(issue.minimum) }),
				...('maximum' in issue && { max: Number(issue.maximum) })
			}))
		);
	}
	const answer = answerPrediction(parsed.data);
	if (!answer.ok) {
		const { field, min, max } = answer;
		return refused([{ field, detail: `Only ${min} to ${max} makes sense beside the other values.`, min, max }]);
	}
	return json(answer.value, { headers: { 'cache-control': 'no-store' } });
};

function refused(errors: FieldProblem[]): Response {
	const fields = errors.map(({ field }) => field).join(', ');
	return problem(422, `Nothing was computed; look at ${fields}.`, { errors });
}
