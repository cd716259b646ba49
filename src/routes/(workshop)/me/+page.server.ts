import { fail, redirect } from '@sveltejs/kit';
import type { Actions } from './$types';
import { waitInWords } from '$lib/server/auth/attempts';
import { guard } from '$lib/server/auth/guard';
import { hashPassword, passwordRefusals, refusePassword } from '$lib/server/auth/passwords';
import { confirmPassword, dropSession, openSession } from '$lib/server/auth/session';
import { unitPreference } from '$lib/coil/units';
import { inWorkshop } from '$lib/server/db/connect';
import { changeName, setPassword, signOutEverywhere } from '$lib/server/db/people';
import { setUnits } from '$lib/server/db/units';
import { readName } from '../workshop/people/person-form';

export const actions: Actions = {
	name: async ({ locals, request }) => {
		const member = guard(locals, 'me.change');
		const typed = String((await request.formData()).get('name') ?? '');
		const name = readName(typed);
		if (!name.ok) return fail(400, { name: typed, nameReason: name.reason });
		await changeName(locals.db, member.workshopId, member.id, name.value);
		return { changed: 'name' as const, done: 'Your name is changed.' };
	},

	units: async ({ locals, request }) => {
		const member = guard(locals, 'me.change');
		const chosen = unitPreference.safeParse(Object.fromEntries(await request.formData()));
		if (!chosen.success) {
			return fail(400, { unitsReason: 'Choose one of the units offered for each. Your units are as they were.' });
		}
		await inWorkshop(locals.db, member.workshopId, (trx) => setUnits(trx, member.workshopId, member.id, chosen.data));
		return { changed: 'units' as const, done: 'Your units are changed, here and on every page.' };
	},

	password: async (event) => {
		const { locals, request } = event;
		const member = guard(locals, 'me.change');
		const form = await request.formData();
		const current = String(form.get('current') ?? '');
		const chosen = String(form.get('chosen') ?? '');
		const refusal = refusePassword(chosen, [member.email, member.name, member.workshopName]);
		if (refusal) return fail(400, { chosenReason: passwordRefusals[refusal] });
		const right = await confirmPassword(event, member.email, current);
		if (!right.ok && right.why === 'limited') {
			event.setHeaders({ 'retry-after': String(Math.ceil(right.waitMs / 1000)) });
			return fail(429, {
				currentReason: `Too many tries. Wait ${waitInWords(right.waitMs)}; your old password still works.`
			});
		}
		if (!right.ok) return fail(400, { currentReason: 'This is not your current password. Nothing was changed.' });
		await setPassword(locals.db, member.workshopId, member.id, await hashPassword(chosen));
		// Every session has ended, this one too; this screen has just shown that it knows the new password.
		await openSession(event, member.email, chosen);
		return { changed: 'password' as const, done: 'Your password is changed. Every other screen is signed out.' };
	},

	everywhere: async (event) => {
		const member = guard(event.locals, 'me.change');
		await signOutEverywhere(event.locals.db, member.workshopId, member.id);
		dropSession(event);
		redirect(303, '/sign-in');
	}
};
