import { error, fail, redirect } from '@sveltejs/kit';
import type { Actions, PageServerLoad } from './$types';
import { guard } from '$lib/server/auth/guard';
import { newToken } from '$lib/server/auth/tokens';
import { isUuid } from '$lib/server/db/ids';
import { changeRole, listPeople, newPasswordLink, removePerson, type Changed } from '$lib/server/db/people';
import { readRole } from '../person-form';

export const load: PageServerLoad = async ({ locals, params }) => {
	const member = guard(locals, 'people.change');
	const person = (await listPeople(locals.db, member.workshopId)).find(({ id }) => id === params.person);
	if (!person) error(404);
	return { person };
};

/** Throws 404 for an unknown id and another workshop's alike; gives the reason when it is the last owner. */
function lastOwner(changed: Changed): string | null {
	if (changed.ok) return null;
	if (changed.why === 'not-found') error(404);
	return 'This is the only owner. A workshop needs one: make someone else an owner first. Nothing was changed.';
}

export const actions: Actions = {
	role: async ({ locals, params, request }) => {
		const member = guard(locals, 'people.change');
		if (!isUuid(params.person)) error(404);
		const role = readRole(String((await request.formData()).get('role') ?? ''));
		if (!role) return fail(400, { roleReason: 'Choose owner, maker or apprentice.' });
		const refusal = lastOwner(await changeRole(locals.db, member.workshopId, params.person, role));
		if (refusal) return fail(409, { role, roleReason: refusal });
		if (params.person === member.id && role !== 'owner') redirect(303, '/me');
		return { roleChanged: true };
	},

	link: async ({ locals, params, url }) => {
		const member = guard(locals, 'people.change');
		if (!isUuid(params.person)) error(404);
		const { token, hash } = newToken();
		const made = await newPasswordLink(locals.db, member.workshopId, params.person, hash);
		if (!made.ok) error(404);
		return { link: `${url.origin}/first-password/${token}` };
	},

	remove: async ({ locals, params }) => {
		const member = guard(locals, 'people.change');
		if (!isUuid(params.person)) error(404);
		const refusal = lastOwner(await removePerson(locals.db, member.workshopId, params.person));
		if (refusal) return fail(409, { removeReason: refusal });
		redirect(303, '/workshop/people');
	}
};
