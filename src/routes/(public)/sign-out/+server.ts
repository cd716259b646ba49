import { redirect } from '@sveltejs/kit';
import type { RequestHandler } from './$types';
import { dropSession } from '$lib/server/auth/session';

export const POST: RequestHandler = (event) => {
	dropSession(event);
	redirect(303, '/sign-in');
};
