import { fail } from '@sveltejs/kit';
import { wallTime } from '$lib/format';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { inWorkshop } from '$lib/server/db/connect';
import { listSpools } from '$lib/server/db/spools';
import { listSpecs, putAway, type SpecSummary } from '$lib/server/db/specs';
import type { SpecWire } from '$lib/spec/content';
import { kindLabels } from '$lib/spec/form';
import { predictSpecResistance } from '$lib/spec/model';
import { wireWords } from '$lib/spec/wire-form';
import { plusMinus } from '$lib/spec/words';
import type { UnitPreference } from '$lib/coil/units';
import type { Actions, PageServerLoad } from './$types';

export type SpecSort = 'name' | 'saved';

export const load: PageServerLoad = async ({ locals, url }) => {
	const member = guard(locals, 'spec.see');
	const { workshopId, timeZone, units } = member;
	const { specs, away, spools } = await inWorkshop(locals.db, workshopId, async (trx) => ({
		specs: await listSpecs(trx, workshopId),
		away: await listSpecs(trx, workshopId, { putAway: true }),
		spools: new Map((await listSpools(trx, workshopId)).map(({ id, wire }) => [id, wire]))
	}));
	const sort: SpecSort = url.searchParams.get('sort') === 'name' ? 'name' : 'saved';
	const order = url.searchParams.get('order');
	const descending = order === 'down' || (order !== 'up' && sort === 'saved');
	const way = descending ? -1 : 1;
	const sorted = [...specs].sort(
		(a, b) =>
			way *
			(sort === 'name'
				? a.name.localeCompare(b.name, 'en', { sensitivity: 'base', numeric: true })
				: a.savedAt.getTime() - b.savedAt.getTime())
	);
	const row = rowIn(units, spools);
	return {
		timeZone,
		thisYear: wallTime(Date.now(), timeZone).year,
		mayChange: may(member.role, 'spec.change'),
		sort,
		descending,
		specs: sorted.map(row),
		away: away.map(row)
	};
};

const rowIn = (units: UnitPreference, spools: ReadonlyMap<string, SpecWire>) => (spec: SpecSummary) => {
	const { content } = spec;
	const wire = (content.spoolId !== null && spools.get(content.spoolId)) || null;
	// By the model and the spool: what kept coils add to that stands on the spec's own page.
	const predicted = predictSpecResistance(content, { wire });
	const ohm = predicted.ok ? predicted.value : null;
	return {
		id: spec.id,
		name: spec.name,
		no: spec.no,
		used: spec.usedAt !== null,
		kind: kindLabels[content.kind],
		wire: wireWords(wire ?? content.wire, units),
		turns: content.coils.map(({ turns }) => turns),
		ohm: ohm && plusMinus(ohm.value, ohm.uncertainty, 'resistance', units.resistance).text,
		made: spec.made,
		waiting: spec.waiting,
		savedAt: spec.savedAt
	};
};

export const actions: Actions = {
	bringBack: async ({ locals, request }) => {
		const { workshopId } = guard(locals, 'spec.change');
		const specId = (await request.formData()).get('spec');
		const done = await inWorkshop(locals.db, workshopId, (trx) =>
			putAway(trx, workshopId, typeof specId === 'string' ? specId : '', false)
		);
		if (done === 'not-found') return fail(404, { problem: 'There is no such spec. Nothing was changed.' });
		return { broughtBack: true };
	}
};
