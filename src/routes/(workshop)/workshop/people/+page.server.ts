import { fail } from '@sveltejs/kit';
import type { Actions, PageServerLoad } from './$types';
import { guard } from '$lib/server/auth/guard';
import { newToken } from '$lib/server/auth/tokens';
import { addPerson, listPeople } from '$lib/server/db/people';
import { readPerson, type PersonReasons } from './person-form';

export const load: PageServerLoad = async ({ locals }) => {
	const member = guard(locals, 'people.change');
	return { people: await listPeople(locals.db, member.workshopId) };
};

export const actions: Actions = {
	add: async ({ locals, request, url }) => {
		const member = guard(locals, 'people.change');
		const read = readPerson(await request.formData());
		if (!read.ok) return fail(400, { typed: read.typed, reasons: read.reasons });
		const { token, hash } = newToken();
		const added = await addPerson(locals.db, member.workshopId, read.person, hash);
		if (!added.ok) {
			const reasons: PersonReasons = {
				email: 'This address is in use already. One address belongs to one person of one workshop.'
			};
			return fail(409, { typed: read.person, reasons });
		}
		return {
			added: { name: read.person.name, cameBack: added.cameBack, link: `${url.origin}/first-password/${token}` }
		};
	}
};
