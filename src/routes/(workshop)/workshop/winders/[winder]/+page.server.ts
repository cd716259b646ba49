import { randomBytes } from 'node:crypto';
import { error, fail, redirect } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { inWorkshop } from '$lib/server/db/connect';
import { findWinder, newLinkKey, removeWinder, revokeLinkKey, updateWinder } from '$lib/server/db/winders';
import type { Winder } from '$lib/server/db/winders';
import { parseWinderForm, typedOf } from '../winder-form.server';
import { linkNow } from './link-now.server';
import type { Actions, PageServerLoad } from './$types';

const nothing = 'There is no such winder.';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const member = guard(locals, 'winder.see');
	const { workshopId } = member;
	const winder = await inWorkshop(locals.db, workshopId, (trx) => findWinder(trx, workshopId, params.winder));
	if (!winder) error(404, nothing);
	return {
		timeZone: member.timeZone,
		mayChange: may(member.role, 'winder.change'),
		winder: {
			id: winder.id,
			name: winder.name,
			hasLinkKey: winder.hasLinkKey,
			linkKeyMadeAt: winder.linkKeyMadeAt,
			pulsesPerTurn: winder.config.pulsesPerTurn,
			seesDirection: winder.config.seesDirection,
			timeScale: winder.config.timeScale
		},
		typed: settingsOf(winder),
		origin: url.origin,
		recipeBoot: randomBytes(4).toString('hex').toUpperCase(),
		link: await linkNow(workshopId, winder.id)
	};
};

function settingsOf({ name, config }: Winder) {
	const keepAfterS = config.keepAfterMs === null ? null : config.keepAfterMs / 1000;
	return typedOf({ ...config, name, keepAfterS });
}

export const actions: Actions = {
	settings: async ({ locals, params, request }) => {
		const { workshopId } = guard(locals, 'winder.change');
		const parsed = parseWinderForm(await request.formData());
		if (!parsed.ok) return fail(422, { form: 'settings' as const, typed: parsed.typed, errors: parsed.errors });
		const done = await inWorkshop(locals.db, workshopId, (trx) =>
			updateWinder(trx, workshopId, params.winder, parsed.value)
		);
		if (done === 'not-found') error(404, nothing);
		if (done === 'name-taken') {
			return fail(409, {
				form: 'settings' as const,
				typed: typedOf(parsed.value),
				errors: {
					name: `Name: “${parsed.value.name}” is another winder’s. Choose one not in use; the rest was kept as typed.`
				}
			});
		}
		await turnstead().ingest.configChanged(workshopId, params.winder);
		return { form: 'settings' as const, saved: true };
	},

	newKey: async ({ locals, params }) => {
		const { workshopId } = guard(locals, 'winder.change');
		const made = await inWorkshop(locals.db, workshopId, async (trx) => {
			const before = await findWinder(trx, workshopId, params.winder);
			const linkKey = await newLinkKey(trx, workshopId, params.winder);
			return before && linkKey ? { linkKey, replaced: before.hasLinkKey } : null;
		});
		if (!made) error(404, nothing);
		await turnstead().ingest.configChanged(workshopId, params.winder);
		return { form: 'key' as const, made };
	},

	revoke: async ({ locals, params }) => {
		const { workshopId } = guard(locals, 'winder.change');
		const done = await inWorkshop(locals.db, workshopId, (trx) => revokeLinkKey(trx, workshopId, params.winder));
		if (done === 'not-found') error(404, nothing);
		await turnstead().ingest.configChanged(workshopId, params.winder);
		return { form: 'key' as const, revoked: true };
	},

	remove: async ({ locals, params }) => {
		const { workshopId } = guard(locals, 'winder.change');
		const { ingest } = turnstead();
		if (!(await ingest.view(workshopId, params.winder))) error(404, nothing);
		// A coil that has not turned goes back to the queue; one that has keeps the winder until its maker decided.
		await ingest.putBack(workshopId, params.winder);
		const done = await inWorkshop(locals.db, workshopId, (trx) => removeWinder(trx, workshopId, params.winder));
		if (done === 'not-found') error(404, nothing);
		if (done === 'has-run') {
			return fail(409, {
				form: 'remove' as const,
				problem:
					'A coil on this winder has turns on it, so the winder was not removed. Keep the coil or set it aside at the bench, then remove the winder.'
			});
		}
		await ingest.configChanged(workshopId, params.winder);
		await ingest.queueChanged(workshopId);
		redirect(303, '/workshop/winders');
	}
};
