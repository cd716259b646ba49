import { error } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { inWorkshop } from '$lib/server/db/connect';
import { findRevision, findSpec } from '$lib/server/db/specs';
import { editorData } from '../../../editor.server';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const member = guard(locals, 'spec.see');
	const { workshopId, timeZone } = member;
	const no = /^\d{1,5}$/.test(params.no) ? Number(params.no) : 0;
	const found = await inWorkshop(locals.db, workshopId, async (trx) => {
		const spec = await findSpec(trx, workshopId, params.spec);
		const revision = spec && (await findRevision(trx, workshopId, spec.id, no));
		return spec && revision
			? { spec, revision, beside: await editorData(trx, member, revision.content, spec.id) }
			: null;
	});
	if (!found) error(404, 'There is no such revision.');
	const { spec, revision, beside } = found;
	return {
		timeZone,
		mayChange: may(member.role, 'spec.change'),
		specId: spec.id,
		latestNo: spec.latest.no,
		revision: {
			no: revision.no,
			name: revision.name,
			why: revision.why,
			by: revision.createdByName,
			savedAt: revision.savedAt,
			used: revision.usedAt !== null
		},
		content: revision.content,
		beside
	};
};
