import { error, fail, redirect } from '@sveltejs/kit';
import { guard } from '$lib/server/auth/guard';
import { inWorkshop } from '$lib/server/db/connect';
import { editMeter, findMeter, meterLimits, removeMeter } from '$lib/server/db/meters';
import { nameTaken, parseMeterForm, typedOf } from '../meter-form.server';
import type { Actions, PageServerLoad } from './$types';

const nothing = 'There is no such meter.';

export const load: PageServerLoad = async ({ locals, params }) => {
	const { workshopId } = guard(locals, 'meter.change');
	const meter = await inWorkshop(locals.db, workshopId, (trx) => findMeter(trx, workshopId, params.meter));
	if (!meter) error(404, nothing);
	return { name: meter.name, typed: typedOf(meter), rangesMax: meterLimits.rangesMax };
};

export const actions: Actions = {
	save: async ({ locals, params, request }) => {
		const { workshopId, units } = guard(locals, 'meter.change');
		const parsed = parseMeterForm(await request.formData(), units);
		if (!parsed.ok) return fail(422, { typed: parsed.typed, errors: parsed.errors });
		const done = await inWorkshop(locals.db, workshopId, (trx) =>
			editMeter(trx, workshopId, params.meter, parsed.value)
		);
		if (done === 'not-found') error(404, nothing);
		if (done === 'name-taken') {
			return fail(409, { typed: typedOf(parsed.value), errors: nameTaken(parsed.value.name) });
		}
		return { saved: true };
	},

	remove: async ({ locals, params }) => {
		const { workshopId } = guard(locals, 'meter.change');
		const done = await inWorkshop(locals.db, workshopId, (trx) => removeMeter(trx, workshopId, params.meter));
		if (done === 'not-found') error(404, nothing);
		redirect(303, '/workshop/meters');
	}
};
