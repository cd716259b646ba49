import { fail } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { inWorkshop } from '$lib/server/db/connect';
import { addMeter, listMeters, meterLimits } from '$lib/server/db/meters';
import { nameTaken, ohmText, parseMeterForm, typedOf, usualMeter } from './meter-form.server';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals }) => {
	const { workshopId } = guard(locals, 'meter.change');
	const meters = await inWorkshop(locals.db, workshopId, (trx) => listMeters(trx, workshopId));
	return {
		meters: meters.map(({ id, name, ranges }) => ({
			id,
			name,
			ranges: ranges.map((range) => ({
				upTo: ohmText(range.upToOhm),
				accuracy: `± (${range.percent} % + ${range.counts} × ${ohmText(range.ohmPerCount)})`
			}))
		})),
		newMeter: usualMeter,
		rangesMax: meterLimits.rangesMax
	};
};

export const actions: Actions = {
	add: async ({ locals, request }) => {
		const { workshopId, units } = guard(locals, 'meter.change');
		const parsed = parseMeterForm(await request.formData(), units);
		if (!parsed.ok) return fail(422, { typed: parsed.typed, errors: parsed.errors });
		const made = await inWorkshop(locals.db, workshopId, (trx) => addMeter(trx, workshopId, parsed.value));
		if (!made.ok) return fail(409, { typed: typedOf(parsed.value), errors: nameTaken(parsed.value.name) });
		return { added: parsed.value.name };
	}
};
