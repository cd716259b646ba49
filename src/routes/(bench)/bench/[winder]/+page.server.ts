import { error } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const member = guard(locals, 'bench.see');
	const view = await turnstead().ingest.view(member.workshopId, params.winder);
	if (!view) error(404, 'There is no such winder.');
	// The view may have been made a while ago: its age is told as of now.
	const ageMs = view.ageMs === null ? null : view.ageMs + Math.max(0, Date.now() - view.at);
	return { view: { ...view, ageMs }, memberId: member.id, timeZone: member.timeZone };
};
