import { json } from '@sveltejs/kit';
import { z } from 'zod';
import { guard } from '$lib/server/auth/guard';
import { inWorkshop } from '$lib/server/db/connect';
import { listRuns } from '$lib/server/db/runs';
import { problem } from '$lib/server/problem';
import { typedLine } from '$lib/typed-values';
import type { RequestHandler } from './$types';

const limitMax = 200;
const limitUsual = 50;

const instant = z.union([z.iso.datetime({ offset: true }), z.iso.date()], {
	error: 'must be a date such as 2026-03-01 (its start in UTC) or an instant such as 2026-03-01T08:30:00Z'
});
const asked = z.object({
	q: z.string().max(100, 'must have at most 100 characters').transform(typedLine).optional(),
	from: instant.optional(),
	to: instant.optional(),
	state: z.enum(['open', 'kept', 'set-aside'], { error: 'must be open, kept or set-aside' }).optional(),
	cursor: z.string().max(200).optional(),
	limit: z.coerce
		.number({ error: `must be a whole number from 1 to ${limitMax}` })
		.int(`must be a whole number from 1 to ${limitMax}`)
		.min(1, `must be from 1 to ${limitMax}`)
		.max(limitMax, `must be from 1 to ${limitMax}`)
		.default(limitUsual)
});

/** Runs of the workshop, the one taken last first. `from` is included, `to` is not; `nextCursor` asks for the next page. */
export const GET: RequestHandler = async ({ locals, url }) => {
	const { workshopId } = guard(locals, 'book.read');
	const parsed = asked.safeParse(Object.fromEntries(url.searchParams));
	if (!parsed.success) {
		const issue = parsed.error.issues[0];
		const field = String(issue?.path[0] ?? '');
		return problem(422, `"${field}" ${issue?.message}.`, { field });
	}
	const { q, from, to, state, cursor, limit } = parsed.data;
	const found = await inWorkshop(locals.db, workshopId, (trx) =>
		listRuns(trx, workshopId, {
			limit,
			...(q ? { q } : {}),
			...(from ? { from: new Date(from) } : {}),
			...(to ? { to: new Date(to) } : {}),
			...(state ? { state } : {}),
			...(cursor ? { cursor } : {})
		})
	);
	if (!found.ok) {
		return problem(422, '"cursor" must be the nextCursor of an answer from here.', { field: 'cursor' });
	}
	return json({ runs: found.runs, nextCursor: found.nextCursor });
};
