import { isHttpError, isRedirect } from '@sveltejs/kit';
import { expect, it } from 'vitest';
import { load } from './+page.server';

async function asked(role: string): Promise<unknown> {
	try {
		return await (load as (event: unknown) => unknown)({ locals: { member: { role } } });
	} catch (thrown) {
		return thrown;
	}
}

it.each(['owner', 'maker'])('the workshop’s address leads the %s to its winders', async (role) => {
	const thrown = await asked(role);
	expect(isRedirect(thrown) && thrown.location).toBe('/workshop/winders');
});

it('the workshop’s address is not for an apprentice', async () => {
	const thrown = await asked('apprentice');
	expect(isHttpError(thrown) && thrown.status).toBe(403);
});
