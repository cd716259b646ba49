import { json } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { inWorkshop } from '$lib/server/db/connect';
import { keptReadings } from '$lib/server/db/specs';
import { textMax } from '$lib/spec/content';
import { lengthOf, typedLine } from '$lib/typed-values';
import type { RequestHandler } from './$types';

/** Kept coils of a bobbin, by its name, and a spool: asked for when either is changed on a spec's page. */
export const GET: RequestHandler = async ({ locals, url }) => {
	const { workshopId } = guard(locals, 'spec.see');
	const bobbinName = typedLine(url.searchParams.get('bobbin') ?? '');
	const spoolId = url.searchParams.get('spool');
	// A longer name is no bobbin's.
	const kept =
		lengthOf(bobbinName) > textMax.name
			? []
			: await inWorkshop(locals.db, workshopId, (trx) => keptReadings(trx, workshopId, { bobbinName, spoolId }));
	return json(kept, { headers: { 'cache-control': 'no-store' } });
};
