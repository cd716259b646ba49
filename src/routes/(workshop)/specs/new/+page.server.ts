import { error, fail, redirect } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { inWorkshop } from '$lib/server/db/connect';
import { addSpec, findSpec, listSpecs } from '$lib/server/db/specs';
import { kinds, textMax, type SpecContent } from '$lib/spec/content';
import { specSentence } from '$lib/spec/listing';
import { startingSpec } from '$lib/spec/start';
import { editorData, spoolRefused } from '../editor.server';
import { readPosted } from '../spec-form.server';
import type { Actions, PageServerLoad } from './$types';

type Trx = Parameters<Parameters<typeof inWorkshop>[2]>[0];

/** Until it is given a name of its own. */
const unnamed = 'New spec';

/** Where a new spec starts: generic figures of a kind, or another spec's latest revision. null: neither. */
async function startOf(trx: Trx, workshopId: string, start: string): Promise<SpecContent | null> {
	const kind = kinds.find((each) => each === start);
	if (kind) return startingSpec(kind, unnamed);
	const spec = await findSpec(trx, workshopId, start);
	if (!spec) return null;
	const { content } = spec.latest;
	const another = `${content.name}, another`;
	return { ...content, name: [...another].length <= textMax.name ? another : content.name };
}

export const load: PageServerLoad = async ({ locals, url }) => {
	const member = guard(locals, 'spec.change');
	const { workshopId } = member;
	const start = url.searchParams.get('start');
	return inWorkshop(locals.db, workshopId, async (trx) => {
		if (start === null) {
			const specs = await listSpecs(trx, workshopId);
			return {
				start: null,
				specs: specs.map(({ id, name, content }) => ({ id, name, sentence: specSentence(content, member.units) }))
			};
		}
		const content = await startOf(trx, workshopId, start);
		if (!content) error(404, 'There is no such spec to start from.');
		return {
			start,
			content,
			generic: kinds.some((kind) => kind === start),
			beside: await editorData(trx, member, content, null)
		};
	});
};

export const actions: Actions = {
	save: async ({ locals, request, url }) => {
		const member = guard(locals, 'spec.change');
		const { workshopId } = member;
		const form = await request.formData();
		const start = url.searchParams.get('start') ?? '';
		const answer = await inWorkshop(locals.db, workshopId, async (trx) => {
			const base = await startOf(trx, workshopId, start);
			if (!base) return null;
			const posted = readPosted(form, member.units, base);
			if (!posted.ok) return { posted };
			const gone = await spoolRefused(trx, workshopId, posted.content);
			if (gone) return { posted: { ...posted, ok: false as const, errors: { spool: gone }, whyError: null } };
			return { posted, id: await addSpec(trx, workshopId, posted.content, member.id) };
		});
		if (!answer) error(404, 'There is no such spec to start from.');
		const { posted, id } = answer;
		if (!posted.ok || id === undefined) {
			const errors = posted.ok ? {} : posted.errors;
			return fail(422, { form: 'save' as const, typed: posted.typed, why: posted.why, errors, whyError: null });
		}
		redirect(303, `/specs/${id}`);
	}
};
