import { fail, redirect } from '@sveltejs/kit';
import type { Actions, PageServerLoad } from './$types';
import { waitInWords } from '$lib/server/auth/attempts';
import { openSession } from '$lib/server/auth/session';
import { wayBack } from '$lib/server/auth/way-back';

export const load: PageServerLoad = ({ locals, url }) => {
	if (locals.member) redirect(303, wayBack(url.searchParams.get('to')));
	return { chosen: url.searchParams.has('chosen') };
};

export const actions: Actions = {
	default: async (event) => {
		const form = await event.request.formData();
		const email = String(form.get('email') ?? '');
		const outcome = await openSession(event, email, String(form.get('password') ?? ''));
		if (outcome.ok) redirect(303, wayBack(event.url.searchParams.get('to')));
		if (outcome.why === 'wrong') {
			return fail(400, { email, refusal: 'Address and password do not belong together. Check both and try again.' });
		}
		event.setHeaders({ 'retry-after': String(Math.ceil(outcome.waitMs / 1000)) });
		return fail(429, {
			email,
			refusal: `Too many tries from here or for this address. Wait ${waitInWords(outcome.waitMs)}, then try again.`
		});
	}
};
