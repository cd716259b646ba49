import { error, fail, redirect } from '@sveltejs/kit';
import { ohmPerM } from '$lib/coil/wire';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { inWorkshop } from '$lib/server/db/connect';
import { addSpool, editSpool, endSpool, findSpool, listSpools, type Spool } from '$lib/server/db/spools';
import { newSpool, parseSpoolForm, typedSpool } from './spool-form.server';
import type { Actions, PageServerLoad } from './$types';

const nothing = 'There is no such spool.';
const nameTaken = (name: string) =>
	`Name: another spool on the shelf is called “${name}” already. What you typed was kept; give this one another name.`;

const row = ({ id, name, lot, wire, note, coils, endedAt }: Spool) => ({
	id,
	name,
	lot,
	wire,
	note,
	coils,
	endedAt,
	/** Measured over what the diameter says, less one; null: not measured. */
	apart: wire.ohmPerM === null ? null : wire.ohmPerM / ohmPerM(wire.diameterM) - 1
});

export const load: PageServerLoad = async ({ locals, url }) => {
	const member = guard(locals, 'spool.see');
	const { workshopId, units, timeZone } = member;
	const mayChange = may(member.role, 'spool.change');
	const edit = mayChange ? url.searchParams.get('edit') : null;
	const { spools, ended, editing } = await inWorkshop(locals.db, workshopId, async (trx) => ({
		spools: await listSpools(trx, workshopId),
		ended: await listSpools(trx, workshopId, { ended: true }),
		editing: edit ? await findSpool(trx, workshopId, edit) : null
	}));
	if (edit && !editing) error(404, nothing);
	return {
		timeZone,
		mayChange,
		spools: spools.map(row),
		ended: ended.map(row),
		newSpool: newSpool(units),
		editing: editing && {
			id: editing.id,
			name: editing.name,
			coils: editing.coils,
			typed: typedSpool(editing, units)
		}
	};
};

export const actions: Actions = {
	add: async ({ locals, request }) => {
		const member = guard(locals, 'spool.change');
		const parsed = parseSpoolForm(await request.formData(), member.units, null);
		if (!parsed.ok) return fail(422, { form: 'add' as const, typed: parsed.typed, errors: parsed.errors });
		const done = await inWorkshop(locals.db, member.workshopId, (trx) =>
			addSpool(trx, member.workshopId, parsed.value, member.id)
		);
		if (!done.ok) {
			return fail(409, {
				form: 'add' as const,
				typed: parsed.typed,
				errors: { name: nameTaken(parsed.value.name) }
			});
		}
		redirect(303, '/spools');
	},

	edit: async ({ locals, request }) => {
		const member = guard(locals, 'spool.change');
		const { workshopId, units } = member;
		const form = await request.formData();
		const spoolId = text(form, 'spool');
		const answer = await inWorkshop(locals.db, workshopId, async (trx) => {
			const spool = await findSpool(trx, workshopId, spoolId);
			if (!spool) return null;
			const parsed = parseSpoolForm(form, units, spool.wire);
			if (!parsed.ok) return fail(422, { form: 'edit' as const, typed: parsed.typed, errors: parsed.errors });
			const done = await editSpool(trx, workshopId, spoolId, parsed.value);
			if (done === 'not-found') return null;
			if (done === 'ok') return 'ok' as const;
			return fail(409, {
				form: 'edit' as const,
				typed: parsed.typed,
				errors: { name: nameTaken(parsed.value.name) }
			});
		});
		if (answer === null) error(404, nothing);
		if (answer === 'ok') redirect(303, '/spools');
		return answer;
	},

	/** Off the shelf, or back on it. */
	end: async ({ locals, request }) => {
		const member = guard(locals, 'spool.change');
		const form = await request.formData();
		const spoolId = text(form, 'spool');
		const done = await inWorkshop(locals.db, member.workshopId, (trx) =>
			endSpool(trx, member.workshopId, spoolId, form.get('to') !== 'shelf')
		);
		if (done === 'not-found') error(404, nothing);
		if (done === 'name-taken') {
			return fail(409, {
				form: 'end' as const,
				problem:
					'Another spool on the shelf has the name of this one by now. Nothing was changed: rename one of the two, then put it back.'
			});
		}
		redirect(303, '/spools');
	}
};

function text(form: FormData, key: string): string {
	const value = form.get(key);
	return typeof value === 'string' ? value : '';
}
