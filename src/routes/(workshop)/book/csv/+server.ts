import { error } from '@sveltejs/kit';
import { sheetTimeText, wholeText } from '$lib/format';
import { coverage } from '$lib/coil/measurement';
import { guard } from '$lib/server/auth/guard';
import { csvFile } from '$lib/csv';
import { bookTotals, listBook } from '$lib/server/db/book';
import { inWorkshop } from '$lib/server/db/connect';
import { parseBookQuery } from '../find';
import { verdictsOf, type LineVerdict } from '../verdicts.server';
import type { RequestHandler } from './$types';

/** About 10 MB of text, made in memory; ten years of a busy workshop. */
const linesMax = 50_000;

/** Tenths of an ohm: finer than any meter reads a coil. */
const ohmCell = (ohm: number | null | undefined) => (ohm == null ? null : Math.round(10 * ohm) / 10);

function measuredCells({ measured, predicted, agreement }: LineVerdict) {
	const spread = (of: { ohm: number | null; uncertaintyOhm: number } | null) =>
		of === null || of.ohm === null ? null : ohmCell(coverage * of.uncertaintyOhm);
	return [ohmCell(measured?.ohm), spread(measured), ohmCell(predicted?.ohm), spread(predicted), agreement ?? ''];
}

/** The runs of the same filter and order as the page, all pages of it. */
export const GET: RequestHandler = async ({ locals, url }) => {
	const { workshopId, timeZone } = guard(locals, 'book.read');
	const { filter, sort, descending } = parseBookQuery(url.searchParams);
	const { lines, verdicts } = await inWorkshop(locals.db, workshopId, async (trx) => {
		const { runs } = await bookTotals(trx, workshopId, timeZone, filter);
		if (runs > linesMax) {
			error(
				413,
				`${wholeText(runs)} runs are more than one file holds (${wholeText(linesMax)}). Narrow the dates and save again.`
			);
		}
		const page = { sort, descending, offset: 0, limit: linesMax };
		const found = await listBook(trx, workshopId, timeZone, filter, page);
		return { lines: found, verdicts: await verdictsOf(trx, workshopId, found) };
	});
	const file = csvFile(
		[
			`When (${timeZone})`,
			...(timeZone === 'UTC' ? [] : ['When (UTC)']),
			'Coil',
			'Sticker',
			'Winder',
			'Wanted (turns)',
			'Wound, on the bobbin (turns)',
			'Counted (turns)',
			'Off by (turns)',
			'Winding (s)',
			'Stopped (s)',
			'Mean rpm',
			'Top rpm',
			'Measured at 20 °C (Ω)',
			'Measured ± 19 in 20 (Ω)',
			'Predicted at 20 °C (Ω)',
			'Predicted ± 19 in 20 (Ω)',
			'Verdict',
			'Spec',
			'Revision',
			'Who',
			'State',
			'Reason',
			'Note',
			'Run'
		],
		lines.map((line, i) => [
			sheetTimeText(line.endedAt, timeZone),
			...(timeZone === 'UTC' ? [] : [sheetTimeText(line.endedAt, 'UTC')]),
			line.name,
			line.sticker,
			line.winderName,
			line.target,
			line.onBobbin,
			line.turns,
			line.state === 'kept' ? line.onBobbin - line.target : null,
			Math.round(line.windingMs / 1000),
			Math.round(line.stoppedMs / 1000),
			Math.round(line.rpmMean),
			Math.round(line.rpmTop),
			...measuredCells(verdicts[i]!),
			line.spec?.name ?? '',
			line.spec?.no ?? null,
			line.who ?? 'by itself',
			line.state === 'kept' ? 'kept' : 'set aside',
			line.reason ?? '',
			line.note,
			line.id
		])
	);
	return new Response(file, {
		headers: {
			'content-type': 'text/csv; charset=utf-8',
			'content-disposition': 'attachment; filename="bench-book.csv"',
			'cache-control': 'no-store'
		}
	});
};
