import { randomUUID } from 'node:crypto';
import { error, fail, redirect } from '@sveltejs/kit';
import { wholeText } from '$lib/format';
import { turnstead } from '$lib/server/app';
import { guard } from '$lib/server/auth/guard';
import { may } from '$lib/server/auth/may';
import { addCoil, findCoil } from '$lib/server/db/coils';
import { inWorkshop } from '$lib/server/db/connect';
import { listMeters } from '$lib/server/db/meters';
import { addReading, readingsMax, strikeReading } from '$lib/server/db/readings';
import { factsOfRun, findRun, noteRun, setRunSpool, traceOfRun } from '$lib/server/db/runs';
import { lengthOf, typedText } from '$lib/typed-values';
import { factsWorthTelling, factText, faultText } from '$lib/winding-words';
import { measuredOf } from './measured.server';
import { blankReading, noMeter, parseReadingForm, typedOf } from './reading-form.server';
import { tracePoints } from './trace';
import type { Actions, PageServerLoad } from './$types';

const noteMax = 2000;

const nothing = 'There is no such run in the bench book.';

/** The meter of the last reading made in this browser: most benches have one. */
const meterCookie = 'meter';
const meterCookieAgeS = 365 * 24 * 3600;

export const load: PageServerLoad = async ({ locals, params, cookies }) => {
	const member = guard(locals, 'book.read');
	const { workshopId, timeZone, units } = member;
	const found = await inWorkshop(locals.db, workshopId, async (trx) => {
		const run = await findRun(trx, workshopId, params.run);
		if (!run) return null;
		return {
			run,
			facts: await factsOfRun(trx, workshopId, run.id),
			trace: run.state === 'open' ? null : await traceOfRun(trx, workshopId, run.id),
			coil: await findCoil(trx, workshopId, run.coilId),
			measured: await measuredOf(trx, workshopId, run),
			meters: await listMeters(trx, workshopId)
		};
	});
	if (!found) error(404, nothing);
	const { run, facts, trace, coil, measured, meters } = found;
	const last = cookies.get(meterCookie);
	const stage = measured.readings.find(({ kind, struckAt }) => kind === 'resistance' && struckAt === null)?.stage;
	const meter = meters.find(({ id }) => id === last) ?? (last === noMeter ? null : meters[0]);
	const view = run.state === 'open' ? await turnstead().ingest.view(workshopId, run.winderId) : null;
	// The bench keeps one run; another open one of the same winder waits behind it.
	const live = view?.run?.runId === run.id ? view.run : null;
	return {
		timeZone,
		mayNote: may(member.role, 'book.note'),
		mayQueue: may(member.role, 'queue.change'),
		mayMeasure: may(member.role, 'reading.add'),
		mayStrike: may(member.role, 'reading.strike'),
		mayChooseSpool: may(member.role, 'spool.change'),
		mayChangeMeters: may(member.role, 'meter.change'),
		units,
		noteMax,
		measured,
		meters: meters.map(({ id, name }) => ({ id, name })),
		// What is read next is most often read where the coil stood last.
		blank: blankReading(units, randomUUID(), meter?.id ?? noMeter, stage),
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

	reading: async ({ locals, params, request, cookies, url }) => {
		const member = guard(locals, 'reading.add');
		const { workshopId, units } = member;
		const form = await request.formData();
		const meters = await inWorkshop(locals.db, workshopId, (trx) => listMeters(trx, workshopId));
		const parsed = parseReadingForm(form, units, meters);
		if (!parsed.ok) return fail(422, { readingTyped: parsed.typed, readingErrors: parsed.errors });
		const { value } = parsed;
		const added = await inWorkshop(locals.db, workshopId, (trx) =>
			addReading(trx, workshopId, params.run, { ...value, by: member.id })
		);
		if (!added.ok) {
			if (added.why === 'not-found') error(404, nothing);
			const problems = {
				open: 'The coil is still on the bench. Keep it or set it aside there, then write down what it measures.',
				'meter-gone': 'The meter was removed meanwhile. Choose another, or type the ± without one.',
				'too-many': `A run holds ${readingsMax} readings at most, struck ones included. Nothing was added.`
			};
			return fail(409, { readingTyped: typedOf(form), readingProblem: problems[added.why] });
		}
		if (value.kind === 'resistance') {
			cookies.set(meterCookie, value.meterId ?? noMeter, {
				path: '/book',
				httpOnly: true,
				sameSite: 'lax',
				secure: url.protocol === 'https:',
				maxAge: meterCookieAgeS
			});
		}
		return { readingAdded: value.id, readingBefore: added.made === 'before' };
	},

	strike: async ({ locals, params, request }) => {
		const member = guard(locals, 'reading.strike');
		const reading = (await request.formData()).get('reading');
		const done = await inWorkshop(locals.db, member.workshopId, (trx) =>
			strikeReading(trx, member.workshopId, params.run, typeof reading === 'string' ? reading : '', member.id)
		);
		if (done === 'not-found') error(404, 'There is no such reading of this run.');
		return { readingStruck: true };
	},

	spool: async ({ locals, params, request }) => {
		const member = guard(locals, 'spool.change');
		const chosen = (await request.formData()).get('spool');
		const spoolId = typeof chosen === 'string' && chosen !== '' ? chosen : null;
		const done = await inWorkshop(locals.db, member.workshopId, (trx) =>
			setRunSpool(trx, member.workshopId, params.run, spoolId)
		);
		if (done === 'not-found') error(404, 'There is no such run or no such spool.');
		return { spoolSaved: true };
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
