import { json } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { inWorkshop } from '$lib/server/db/connect';
import { factsOfRun, findRun, traceOfRun } from '$lib/server/db/runs';
import { notFound } from '$lib/server/problem';
import type { RequestHandler } from './$types';

/** One run: its figures, what happened when, and the trace of turns and speed (null while it is open). */
export const GET: RequestHandler = async ({ locals, params }) => {
	const { workshopId } = guard(locals, 'book.read');
	const found = await inWorkshop(locals.db, workshopId, async (trx) => {
		const run = await findRun(trx, workshopId, params.run);
		if (!run) return null;
		const facts = await factsOfRun(trx, workshopId, run.id);
		return { ...run, facts, trace: await traceOfRun(trx, workshopId, run.id) };
	});
	return found ? json(found) : notFound();
};
