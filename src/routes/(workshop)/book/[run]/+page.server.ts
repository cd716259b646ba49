import { error, fail, redirect } from '@sveltejs/kit';
import { wholeText } from '$lib/format';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { addCoil, findCoil } from '$lib/server/db/coils';
import { inWorkshop } from '$lib/server/db/connect';
import { factsOfRun, findRun, noteRun, traceOfRun } from '$lib/server/db/runs';
import { lengthOf, typedText } from '$lib/typed-values';
import { factsWorthTelling, factText, faultText } from '$lib/winding-words';
import { tracePoints } from './trace';
import type { Actions, PageServerLoad } from './$types';

const noteMax = 2000;

const nothing = 'There is no such run in the bench book.';

export const load: PageServerLoad = async ({ locals, params }) => {
	const member = guard(locals, 'book.read');
	const { workshopId, timeZone } = member;
	const found = await inWorkshop(locals.db, workshopId, async (trx) => {
		const run = await findRun(trx, workshopId, params.run);
		if (!run) return null;
		return {
			run,
			facts: await factsOfRun(trx, workshopId, run.id),
			trace: run.state === 'open' ? null : await traceOfRun(trx, workshopId, run.id),
			coil: await findCoil(trx, workshopId, run.coilId)
		};
	});
	if (!found) error(404, nothing);
	const { run, facts, trace, coil } = found;
	const view = run.state === 'open' ? await turnstead().ingest.view(workshopId, run.winderId) : null;
	// The bench keeps one run; another open one of the same winder waits behind it.
	const live = view?.run?.runId === run.id ? view.run : null;
	return {
		timeZone,
		mayNote: may(member.role, 'book.note'),
		mayQueue: may(member.role, 'queue.change'),
		noteMax,
		run,
		coilNote: coil?.note ?? '',
		again: coil?.againOfRun ?? null,
		figures: live ?? {
			turns: run.turns,
			onBobbin: run.onBobbin,
			windingMs: run.windingMs,
			stoppedMs: run.stoppedMs,
			rpmMean: run.rpmMean,
			rpmTop: run.rpmTop,
			takenBack: run.takenBack,
			looks: run.looks,
			snaps: run.snaps
		},
		liveState: live?.state ?? null,
		faults: (live?.faults ?? run.faults).map((kind) => faultText(kind)),
		happened: factsWorthTelling(facts).map((fact) => ({
			no: fact.no,
			at: fact.at,
			text: factText(fact.kind, fact),
			turns: fact.turns,
			who: fact.memberName
		})),
		points: trace ? tracePoints(trace) : []
	};
};

export const actions: Actions = {
	note: async ({ locals, params, request }) => {
		const member = guard(locals, 'book.note');
		const given = (await request.formData()).get('note');
		const typed = typeof given === 'string' ? given : '';
		const note = typedText(typed);
		if (lengthOf(note) > noteMax) {
			return fail(422, {
				noteTyped: typed,
				noteError: `Note: up to ${wholeText(noteMax)} characters; ${wholeText(lengthOf(note))} were kept as typed, and the note before is still stored.`
			});
		}
		const done = await inWorkshop(locals.db, member.workshopId, (trx) =>
			noteRun(trx, member.workshopId, params.run, note)
		);
		if (done === 'not-found') error(404, nothing);
		return { noteSaved: true };
	},

	/** The same again, spec, spool and all: one coil at the end of the queue. */
	again: async ({ locals, params }) => {
		const member = guard(locals, 'queue.change');
		const { workshopId } = member;
		const coil = await inWorkshop(locals.db, workshopId, async (trx) => {
			const run = await findRun(trx, workshopId, params.run);
			if (!run) return null;
			const before = await findCoil(trx, workshopId, run.coilId);
			const { name, target, lookEvery, direction, topFaces, toleranceTurns } = run;
			const { spec, spoolId, firstLook, fullTurns } = run;
			return addCoil(
				trx,
				workshopId,
				{ name, target, lookEvery, direction, topFaces, toleranceTurns, note: before?.note ?? '' },
				{ createdBy: member.id, againOfRun: run.id, spec, spoolId, firstLook, fullTurns }
			);
		});
		if (!coil) error(404, nothing);
		await turnstead().ingest.queueChanged(workshopId);
		redirect(303, '/wind');
	}
};
