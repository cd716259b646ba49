import { error, json } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { inWorkshop } from '$lib/server/db/connect';
import { findSpec } from '$lib/server/db/specs';
import type { RequestHandler } from './$types';

/** What a spec's latest revision says: asked for when another's page compares itself with it. */
export const GET: RequestHandler = async ({ locals, params }) => {
	const { workshopId } = guard(locals, 'spec.see');
	const spec = await inWorkshop(locals.db, workshopId, (trx) => findSpec(trx, workshopId, params.spec));
	if (!spec) error(404, 'There is no such spec.');
	return json(spec.latest.content, { headers: { 'cache-control': 'no-store' } });
};
