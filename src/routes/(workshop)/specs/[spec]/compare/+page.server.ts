import { error } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { inWorkshop } from '$lib/server/db/connect';
import { findRevision, findSpec, listSpecChoices, type Revision } from '$lib/server/db/specs';
import { findSpool } from '$lib/server/db/spools';
import { compareSpecs, type Side } from '$lib/spec/compare';
import { readAsked, writeAsked, type Asked } from './sides';
import type { PageServerLoad } from './$types';

const nothing = 'There is no such revision to compare. Choose one from the spec’s own page.';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const member = guard(locals, 'spec.see');
	const { workshopId, timeZone, units } = member;
	const found = await inWorkshop(locals.db, workshopId, async (trx) => {
		const spec = await findSpec(trx, workshopId, params.spec);
		if (!spec) return null;
		const others = (await listSpecChoices(trx, workshopId)).filter(({ id }) => id !== spec.id);
		const given = (name: 'a' | 'b'): Asked | null => {
			const text = url.searchParams.get(name) ?? '';
			if (text === '') return null;
			const asked = readAsked(text) ?? error(404, nothing);
			return asked.spec === spec.id ? { ...asked, spec: null } : asked;
		};
		// Where the address leaves one open: the latest, beside the one before it or another spec's.
		const latest = spec.latest.no;
		const right = given('b') ?? (latest > 1 ? { spec: null, no: latest } : null);
		const before = right?.spec === null && right.no > 1 ? right.no - 1 : latest;
		const left = given('a') ?? { spec: null, no: before };
		const one = left.spec === null ? await findRevision(trx, workshopId, spec.id, left.no) : null;
		const other = right && (await findRevision(trx, workshopId, right.spec ?? spec.id, right.no));
		if (!one || (right && !other)) return null;
		const withSpool = async (revision: Revision): Promise<Side> => {
			const { spoolId } = revision.content;
			const spool = spoolId === null ? null : await findSpool(trx, workshopId, spoolId);
			return { content: revision.content, spoolWire: spool?.wire ?? null, spoolName: spool?.name ?? null };
		};
		return { spec, others, one, other, a: await withSpool(one), b: other && (await withSpool(other)) };
	});
	if (!found) error(404, nothing);
	const { spec, others, one, other, a, b } = found;
	const told = ({ specId, no, name, why, createdByName, savedAt }: Revision) => ({
		asked: writeAsked(spec.id, specId, no),
		specId,
		no,
		name,
		why,
		by: createdByName,
		savedAt
	});
	return {
		timeZone,
		spec: { id: spec.id, name: spec.latest.name },
		revisions: spec.revisions.map(({ no, name, why }) => ({ no, name, why })),
		others: others.map(({ id, name, no }) => ({ asked: writeAsked(spec.id, id, no), name, no })),
		a: told(one),
		b: other && told(other),
		comparison: b && compareSpecs(a, b, units),
		spools: [a, ...(b ? [b] : [])].some(({ spoolWire }) => spoolWire !== null)
	};
};
