import { redirect } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import type { PageServerLoad } from './$types';

/** The workshop has no page of its own: its winders come first. */
export const load: PageServerLoad = ({ locals }) => {
	guard(locals, 'winder.see');
	redirect(307, '/workshop/winders');
};
