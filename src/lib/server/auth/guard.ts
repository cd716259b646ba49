import { error, redirect } from '@sveltejs/kit';
import type { Member } from '../db/people.ts';
import { may, type Action } from './may.ts';

/**
 * The member, if one is signed in and may do this. Otherwise throws: a redirect to the sign-in page, or 403.
 * Below /api/v1 the hooks turn both into problem+json (401, 403).
 */
export function guard(locals: App.Locals, action: Action): Member {
	if (!locals.member) redirect(303, '/sign-in');
	if (!may(locals.member.role, action)) {
		error(403, 'Your role does not include this. Nothing was changed. Ask the owner of your workshop.');
	}
	return locals.member;
}
