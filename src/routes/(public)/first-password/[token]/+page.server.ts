import { fail, redirect } from '@sveltejs/kit';
import type { Actions, PageServerLoad } from './$types';
import { accountAttempts, addressAttempts, clientKey, waitInWords } from '$lib/server/auth/attempts';
import { hashPassword, passwordRefusals, refusePassword } from '$lib/server/auth/passwords';
import { dropSession } from '$lib/server/auth/session';
import { hashToken } from '$lib/server/auth/tokens';
import { choosePassword, findLinkHolder } from '$lib/server/db/people';

export const load: PageServerLoad = async ({ locals, params, setHeaders }) => {
	setHeaders({ 'cache-control': 'private, no-store' });
	const holder = await findLinkHolder(locals.db, hashToken(params.token));
	return { holder: holder && { name: holder.name, email: holder.email, workshopName: holder.workshopName } };
};

export const actions: Actions = {
	default: async (event) => {
		const { locals, params, request } = event;
		// Hashing costs work, so even a holder of a link gets only so many goes.
		const waitMs = addressAttempts.take(clientKey(event.getClientAddress()), Date.now());
		if (waitMs > 0) {
			event.setHeaders({ 'retry-after': String(Math.ceil(waitMs / 1000)) });
			return fail(429, { reason: `Too many tries from here. Wait ${waitInWords(waitMs)}, then try again.` });
		}
		const linkHash = hashToken(params.token);
		const holder = await findLinkHolder(locals.db, linkHash);
		// The page itself then says that the link no longer works.
		if (!holder) return fail(410, { reason: null });
		const password = String((await request.formData()).get('password') ?? '');
		const refusal = refusePassword(password, [
			holder.email,
			holder.name,
			holder.workshopName,
			holder.workshopShortName
		]);
		if (refusal) return fail(400, { reason: passwordRefusals[refusal] });
		if (!(await choosePassword(locals.db, holder, linkHash, await hashPassword(password)))) {
			return fail(410, { reason: null });
		}
		accountAttempts.forget(holder.email);
		dropSession(event);
		redirect(303, '/sign-in?chosen');
	}
};
