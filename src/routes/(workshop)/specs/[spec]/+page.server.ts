import { error, fail, redirect } from '@sveltejs/kit';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { inWorkshop } from '$lib/server/db/connect';
import { findRevision, findSpec, pickupsAtOnceMax, putAway, saveSpec, windSpec } from '$lib/server/db/specs';
import { keptAsTyped, typedWhole } from '$lib/typed-values';
import { editorData, spoolRefused } from '../editor.server';
import { readPosted } from '../spec-form.server';
import type { Actions, PageServerLoad } from './$types';

const nothing = 'There is no such spec.';

/** A revision's number as it stands in an address or a form; 0 is none. */
const numberOf = (text: FormDataEntryValue | null): number =>
	typeof text === 'string' && /^\d{1,5}$/.test(text) ? Number(text) : 0;

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const member = guard(locals, 'spec.see');
	const { workshopId, timeZone } = member;
	const mayChange = may(member.role, 'spec.change');
	const from = mayChange ? url.searchParams.get('from') : null;
	const found = await inWorkshop(locals.db, workshopId, async (trx) => {
		const spec = await findSpec(trx, workshopId, params.spec);
		const start = spec && (from === null ? spec.latest : await findRevision(trx, workshopId, spec.id, numberOf(from)));
		return spec && start ? { spec, start, beside: await editorData(trx, member, start.content, spec.id) } : null;
	});
	if (!found) error(404, nothing);
	const { spec, start, beside } = found;
	return {
		timeZone,
		mayChange,
		mayQueue: may(member.role, 'queue.change'),
		pickupsAtOnceMax,
		spec: {
			id: spec.id,
			name: spec.latest.name,
			putAway: spec.putAwayAt !== null,
			made: spec.made,
			no: spec.latest.no,
			savedAt: spec.latest.savedAt,
			used: spec.latest.usedAt !== null,
			why: spec.latest.why
		},
		/** What a save is compared with. */
		latest: spec.latest.content,
		/** What the fields are written from: the latest revision, or the one to start the next from. */
		content: start.content,
		fieldsFrom: start.no,
		revisions: spec.revisions.map(({ no, why, createdByName, savedAt, usedAt }) => ({
			no,
			why,
			by: createdByName,
			savedAt,
			used: usedAt !== null
		})),
		beside
	};
};

export const actions: Actions = {
	save: async ({ locals, params, request }) => {
		const member = guard(locals, 'spec.change');
		const { workshopId } = member;
		const form = await request.formData();
		const answer = await inWorkshop(locals.db, workshopId, async (trx) => {
			const spec = await findSpec(trx, workshopId, params.spec);
			const start = spec && (await findRevision(trx, workshopId, spec.id, numberOf(form.get('fieldsFrom'))));
			if (!spec || !start) return null;
			const posted = readPosted(form, member.units, start.content);
			if (!posted.ok) return { posted, saved: null };
			const gone = await spoolRefused(trx, workshopId, posted.content);
			if (gone) {
				return { posted: { ...posted, ok: false as const, errors: { spool: gone }, whyError: null }, saved: null };
			}
			// Told that somebody saved meanwhile, the person wants theirs as the revision after that.
			const over = form.get('over') === 'next';
			const savedAt = Number(form.get(over ? 'overSavedAt' : 'baseSavedAt'));
			const saved = await saveSpec(trx, workshopId, spec.id, {
				baseNo: numberOf(form.get(over ? 'overNo' : 'baseNo')),
				baseSavedAt: new Date(Number.isFinite(savedAt) ? savedAt : 0),
				content: posted.content,
				why: posted.why,
				by: member.id,
				asNew: over || form.get('asNew') === 'yes'
			});
			return { posted, saved };
		});
		if (!answer) error(404, nothing);
		const { posted, saved } = answer;
		const { typed, why } = posted;
		if (!posted.ok) {
			return fail(422, { form: 'save' as const, typed, why, errors: posted.errors, whyError: posted.whyError });
		}
		if (!saved || (!saved.ok && saved.why === 'not-found')) error(404, nothing);
		if (!saved.ok) {
			const { no, savedAt, createdByName } = saved.latest;
			return fail(409, {
				form: 'save' as const,
				typed,
				why,
				meanwhile: { no, savedAt, by: createdByName }
			});
		}
		// From another revision the address says so: what was saved is the latest now.
		if (numberOf(form.get('fieldsFrom')) !== saved.no && form.get('scripted') !== 'yes') {
			redirect(303, `/specs/${params.spec}`);
		}
		return { form: 'save' as const, saved: { no: saved.no, made: saved.made } };
	},

	wind: async ({ locals, params, request }) => {
		const member = guard(locals, 'queue.change');
		const { workshopId } = member;
		const form = await request.formData();
		const text = (name: string) => {
			const value = form.get(name);
			return typeof value === 'string' ? value : '';
		};
		const typed = { pickups: text('pickups'), spool: text('spool') };
		const pickups = typedWhole(typed.pickups, ['pickups', 'pickup']);
		if (pickups === null || pickups < 1 || pickups > pickupsAtOnceMax) {
			return fail(422, {
				form: 'wind' as const,
				wind: typed,
				pickupsError: `How many pickups: 1 to ${pickupsAtOnceMax}; ${keptAsTyped(typed.pickups)}`
			});
		}
		const done = await inWorkshop(locals.db, workshopId, (trx) =>
			windSpec(trx, workshopId, {
				specId: params.spec,
				no: numberOf(form.get('no')),
				pickups,
				spoolId: typed.spool === '' ? null : typed.spool,
				by: member.id
			})
		);
		if (!done.ok && done.why === 'not-found') error(404, `${nothing} Or its spool is another’s. Nothing was queued.`);
		if (!done.ok) {
			return fail(409, {
				form: 'wind' as const,
				wind: typed,
				problem: 'This spec is put away, so nothing was queued. Bring it back first.'
			});
		}
		await turnstead().ingest.queueChanged(workshopId);
		redirect(303, '/wind');
	},

	away: async ({ locals, params, request }) => {
		const { workshopId } = guard(locals, 'spec.change');
		const away = (await request.formData()).get('away') === 'yes';
		const done = await inWorkshop(locals.db, workshopId, (trx) => putAway(trx, workshopId, params.spec, away));
		if (done === 'not-found') error(404, nothing);
		return { form: 'away' as const, away };
	}
};
