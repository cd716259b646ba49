import { wallTime } from '$lib/format';
import { guard } from '$lib/server/auth/guard';
import { bookPeople, bookTotals, listBook } from '$lib/server/db/book';
import { wholeBook } from '$lib/book-filter';
import { inWorkshop } from '$lib/server/db/connect';
import { findCharactersMax, parseBookQuery } from './find';
import { verdictsOf } from './verdicts.server';
import type { PageServerLoad } from './$types';

/** A printed page of A4 or Letter holds about this many lines twice; more only makes the search slower to read. */
const linesPerPage = 50;

export const load: PageServerLoad = async ({ locals, url }) => {
	const member = guard(locals, 'book.read');
	const { workshopId, timeZone, units } = member;
	const query = parseBookQuery(url.searchParams);
	const found = await inWorkshop(locals.db, workshopId, async (trx) => {
		const totals = await bookTotals(trx, workshopId, timeZone, query.filter);
		const pages = Math.max(1, Math.ceil(totals.runs / linesPerPage));
		const page = Math.min(query.page, pages);
		const lines = await listBook(trx, workshopId, timeZone, query.filter, {
			sort: query.sort,
			descending: query.descending,
			offset: (page - 1) * linesPerPage,
			limit: linesPerPage
		});
		const verdicts = await verdictsOf(trx, workshopId, lines);
		const everything = totals.runs > 0 ? totals : await bookTotals(trx, workshopId, timeZone, wholeBook);
		const judged = lines.map(({ read: _read, ...line }, i) => ({ ...line, ...verdicts[i]! }));
		return { totals, pages, page, lines: judged, empty: everything.runs === 0, ...(await bookPeople(trx, workshopId)) };
	});
	return {
		...found,
		timeZone,
		units,
		thisYear: wallTime(Date.now(), timeZone).year,
		sort: query.sort,
		descending: query.descending,
		typed: query.typed,
		refused: query.refused,
		findCharactersMax,
		filtered: Object.values(query.typed).some((value) => value !== '')
	};
};
