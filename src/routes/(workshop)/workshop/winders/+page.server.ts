import { fail } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { inWorkshop } from '$lib/server/db/connect';
import { addWinder, listWinders, newLinkKey } from '$lib/server/db/winders';
import { newWinderTyped, parseWinderForm, typedOf } from './winder-form.server';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals }) => {
	const member = guard(locals, 'winder.see');
	const { workshopId } = member;
	const winders = await inWorkshop(locals.db, workshopId, (trx) => listWinders(trx, workshopId));
	const { ingest } = turnstead();
	return {
		mayChange: may(member.role, 'winder.change'),
		newWinder: newWinderTyped,
		winders: await Promise.all(
			winders.map(async (winder) => {
				const view = await ingest.view(workshopId, winder.id);
				return {
					id: winder.id,
					name: winder.name,
					hasLinkKey: winder.hasLinkKey,
					link: view?.link ?? ('never' as const),
					lastLineAt: view && view.ageMs !== null ? view.at - view.ageMs : null,
					now: view?.at ?? Date.now(),
					...winder.config
				};
			})
		)
	};
};

export const actions: Actions = {
	add: async ({ locals, request }) => {
		const { workshopId } = guard(locals, 'winder.change');
		const parsed = parseWinderForm(await request.formData());
		if (!parsed.ok) return fail(422, { typed: parsed.typed, errors: parsed.errors });
		const made = await inWorkshop(locals.db, workshopId, async (trx) => {
			const answer = await addWinder(trx, workshopId, parsed.value);
			if (!answer.ok) return null;
			const { id, name } = answer.winder;
			return { id, name, linkKey: (await newLinkKey(trx, workshopId, id)) ?? '' };
		});
		if (!made) {
			return fail(409, {
				typed: typedOf(parsed.value),
				errors: {
					name: `Name: “${parsed.value.name}” is another winder’s. Choose one not in use; the rest was kept as typed.`
				}
			});
		}
		const { ingest } = turnstead();
		await ingest.configChanged(workshopId, made.id);
		// A coil that waits goes to the new bench at once.
		await ingest.queueChanged(workshopId);
		return { made };
	}
};
