import { error, fail, redirect } from '@sveltejs/kit';
import { wholeText } from '$lib/format';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { addCoil, editCoil, findCoil, listWaiting, moveCoil, removeCoil, type Coil } from '$lib/server/db/coils';
import { inWorkshop } from '$lib/server/db/connect';
import { windNow } from './benches.server';
import { alikeMax, emptyCoil, parseCoilForm, type CoilTyped } from './coil-form.server';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, url, depends }) => {
	depends('wind:now');
	const member = guard(locals, 'queue.see');
	const mayChange = may(member.role, 'queue.change');
	const edit = mayChange ? url.searchParams.get('edit') : null;
	const editing = edit
		? await inWorkshop(locals.db, member.workshopId, (trx) => findCoil(trx, member.workshopId, edit))
		: null;
	if (edit && !editing) error(404, 'There is no such coil in the queue.');
	return {
		...(await windNow(locals.db, member.workshopId)),
		mayChange,
		mayAddWinder: may(member.role, 'winder.change'),
		mayTap: may(member.role, 'bench.tap'),
		emptyCoil,
		alikeMax,
		editing:
			editing && (editing.state === 'waiting' || editing.state === 'on-bench')
				? { id: editing.id, state: editing.state, typed: typedOf(editing) }
				: null
	};
};

function typedOf(coil: Coil): CoilTyped {
	return {
		name: coil.name,
		target: wholeText(coil.target),
		lookEvery: wholeText(coil.lookEvery),
		direction: coil.direction,
		topFaces: coil.topFaces,
		note: coil.note,
		alike: '1'
	};
}

const goneSentence =
	'This coil is not waiting any more: a bench took it, or somebody removed it. Nothing was changed; the list below is as it is now.';

export const actions: Actions = {
	add: async ({ locals, request }) => {
		const member = guard(locals, 'queue.change');
		const parsed = parseCoilForm(await request.formData());
		if (!parsed.ok) return fail(422, { form: 'add' as const, typed: parsed.typed, errors: parsed.errors });
		const { coil, alike } = parsed.value;
		await inWorkshop(locals.db, member.workshopId, async (trx) => {
			for (let i = 0; i < alike; i++) await addCoil(trx, member.workshopId, coil, { createdBy: member.id });
		});
		await turnstead().ingest.queueChanged(member.workshopId);
		redirect(303, '/wind');
	},

	edit: async ({ locals, request }) => {
		const member = guard(locals, 'queue.change');
		const form = await request.formData();
		const coilId = text(form, 'coil');
		const parsed = parseCoilForm(form);
		if (!parsed.ok) return fail(422, { form: 'edit' as const, coilId, typed: parsed.typed, errors: parsed.errors });
		const now = await inWorkshop(locals.db, member.workshopId, (trx) =>
			editCoil(trx, member.workshopId, coilId, parsed.value.coil)
		);
		if (now === 'not-found') return fail(409, { form: 'edit' as const, coilId, problem: goneSentence });
		const { ingest } = turnstead();
		if (now === 'on-bench') await ingest.planChanged(member.workshopId, coilId);
		else await ingest.queueChanged(member.workshopId);
		redirect(303, '/wind');
	},

	/** One step up or down, by button or key. */
	move: async ({ locals, request }) => {
		const member = guard(locals, 'queue.change');
		const form = await request.formData();
		const coilId = text(form, 'coil');
		const up = form.get('way') === 'up';
		const moved = await inWorkshop(locals.db, member.workshopId, async (trx) => {
			const order = (await listWaiting(trx, member.workshopId)).map((coil) => coil.id);
			const at = order.indexOf(coilId);
			if (at < 0) return 'not-found';
			const before = up ? order[Math.max(0, at - 1)] : (order[at + 2] ?? null);
			return moveCoil(trx, member.workshopId, coilId, before ?? null);
		});
		if (moved !== 'ok') return fail(409, { form: 'queue' as const, problem: goneSentence });
		await turnstead().ingest.queueChanged(member.workshopId);
		redirect(303, '/wind');
	},

	/** Anywhere in the queue, by dragging: before another coil, or at the end. */
	place: async ({ locals, request }) => {
		const member = guard(locals, 'queue.change');
		const form = await request.formData();
		const before = text(form, 'before');
		const moved = await inWorkshop(locals.db, member.workshopId, (trx) =>
			moveCoil(trx, member.workshopId, text(form, 'coil'), before === '' ? null : before)
		);
		if (moved !== 'ok') return fail(409, { form: 'queue' as const, problem: goneSentence });
		await turnstead().ingest.queueChanged(member.workshopId);
		redirect(303, '/wind');
	},

	remove: async ({ locals, request }) => {
		const member = guard(locals, 'queue.change');
		const coilId = text(await request.formData(), 'coil');
		const removed = await inWorkshop(locals.db, member.workshopId, (trx) => removeCoil(trx, member.workshopId, coilId));
		if (removed === 'on-bench') {
			return fail(409, {
				form: 'queue' as const,
				problem: 'A bench has just taken this coil, so it was not removed. Put it back first, then remove it.'
			});
		}
		if (removed !== 'ok') return fail(409, { form: 'queue' as const, problem: goneSentence });
		await turnstead().ingest.queueChanged(member.workshopId);
		redirect(303, '/wind');
	},

	putBack: async ({ locals, request }) => {
		const member = guard(locals, 'queue.change');
		const winderId = text(await request.formData(), 'winder');
		const { ingest } = turnstead();
		if (!(await ingest.view(member.workshopId, winderId))) error(404, 'There is no such winder.');
		const answer = await ingest.putBack(member.workshopId, winderId);
		if (answer === 'turned') {
			return fail(409, {
				form: 'benches' as const,
				problem:
					'The spindle has turned, so the coil stays on the bench and its turns are kept. Keep it or set it aside at the bench.'
			});
		}
		if (answer === 'no-run') {
			return fail(409, {
				form: 'benches' as const,
				problem: 'There is no coil on this bench any more. Nothing was changed.'
			});
		}
		redirect(303, '/wind');
	}
};

function text(form: FormData, key: string): string {
	const value = form.get(key);
	return typeof value === 'string' ? value : '';
}
