import { sql, type Expression, type SqlBool, type Transaction } from 'kysely';
import type { BookFilter, BookSort, BookState } from '../../book-filter.ts';
import { copperAlphaPerK } from '../../coil/wire.ts';
import type { ResistanceRead } from '../../spec/judged.ts';
import { resistanceRead } from './readings.ts';
import type { Database } from './schema.ts';

/** One line of the bench book: a run that is kept or set aside. */
export interface BookLine {
	id: string;
	endedAt: Date;
	name: string;
	sticker: string;
	winderName: string;
	target: number;
	/** Turns that carry wire. */
	onBobbin: number;
	/** Turns the spindle made. */
	turns: number;
	windingMs: number;
	stoppedMs: number;
	rpmMean: number;
	rpmTop: number;
	/** null: the bench kept it by itself. */
	who: string | null;
	state: BookState;
	reason: string | null;
	note: string;
	/** The spec's revision it was wound by; null: without one. */
	spec: { id: string; no: number; name: string } | null;
	spoolId: string | null;
	/** The newest resistance that was not struck out; null: none was read. */
	read: ResistanceRead | null;
}

export interface BookTotals {
	runs: number;
	/** Turns on the bobbins of all those runs. */
	turns: number;
}

export interface BookPage {
	/** One column; runs that are equal in it stand newest first. */
	sort: BookSort;
	descending: boolean;
	offset: number;
	limit: number;
}

type Trx = Transaction<Database>;

/** Order expressions, one for each column of the table. */
const orders = {
	when: sql`run.ended_at`,
	coil: sql`lower(run.coil_name)`,
	winder: sql`lower(winder.name)`,
	wanted: sql`run.target`,
	wound: sql`run.on_bobbin`,
	// How far off, whichever way: what one looks for is the coils that missed. A run set aside was not meant to hit.
	off: sql`case when run.state = 'kept' then abs(run.on_bobbin - run.target) end`,
	winding: sql`run.winding_ms`,
	stopped: sql`run.stopped_ms`,
	rpm: sql`run.rpm_mean`,
	// Brought to 20 °C by the law of `to20C`; an open coil reads more than any other.
	measured: sql`case when newest.stage is not null then coalesce(
		newest.value / (1 + ${sql.lit(copperAlphaPerK)}::double precision * (newest.temperature_c - 20)), 'infinity') end`,
	who: sql`lower(member.name)`,
	state: sql`run.state || coalesce(run.set_aside_reason, '')`
} as const satisfies Record<BookSort, unknown>;

/** Runs of a filter in order. Stable: a page begins where the one before ended as long as nothing new is kept. */
export async function listBook(
	trx: Trx,
	workshopId: string,
	timeZone: string,
	filter: BookFilter,
	page: BookPage
): Promise<BookLine[]> {
	const direction = page.descending ? 'desc' : 'asc';
	const rows = await closedRuns(trx, workshopId, timeZone, filter)
		.leftJoinLateral(
			(eb) =>
				eb
					.selectFrom('reading')
					.select([
						'reading.value',
						'reading.temperature_c',
						'reading.temperature_half_width_c',
						'reading.meter_range',
						'reading.half_width',
						'reading.stage'
					])
					.whereRef('reading.workshop_id', '=', 'run.workshop_id')
					.whereRef('reading.run_id', '=', 'run.id')
					.where('reading.kind', '=', 'resistance')
					.where('reading.struck_at', 'is', null)
					.orderBy('reading.taken_at', 'desc')
					.orderBy('reading.id')
					.limit(1)
					.as('newest'),
			(join) => join.onTrue()
		)
		.select([
			'run.spec_id',
			'run.spec_revision_no',
			'spec_revision.name as spec_name',
			'run.spool_id',
			'newest.value',
			'newest.temperature_c',
			'newest.temperature_half_width_c',
			'newest.meter_range',
			'newest.half_width',
			'newest.stage as reading_stage',
			'run.id',
			'run.ended_at',
			'run.coil_name',
			'run.sticker',
			'winder.name as winder_name',
			'run.target',
			'run.on_bobbin',
			'run.turns',
			'run.winding_ms',
			'run.stopped_ms',
			'run.rpm_mean',
			'run.rpm_top',
			'member.name as member_name',
			'run.state',
			'run.set_aside_reason',
			'run.note'
		])
		.orderBy(orders[page.sort], (order) => (direction === 'desc' ? order.desc().nullsLast() : order.asc().nullsLast()))
		.orderBy('run.ended_at', 'desc')
		.orderBy('run.id', 'desc')
		.offset(page.offset)
		.limit(page.limit)
		.execute();
	return rows.map((row) => ({
		id: row.id,
		// A closed run has its end and its figures; the zeros below are for types, not for data.
		endedAt: row.ended_at ?? new Date(0),
		name: row.coil_name,
		sticker: row.sticker ?? '',
		winderName: row.winder_name,
		target: row.target,
		onBobbin: row.on_bobbin ?? 0,
		turns: row.turns ?? 0,
		windingMs: row.winding_ms ?? 0,
		stoppedMs: row.stopped_ms ?? 0,
		rpmMean: row.rpm_mean ?? 0,
		rpmTop: row.rpm_top ?? 0,
		who: row.member_name,
		state: row.state as BookState,
		reason: row.set_aside_reason,
		note: row.note,
		spec:
			row.spec_id !== null && row.spec_revision_no !== null
				? { id: row.spec_id, no: row.spec_revision_no, name: row.spec_name ?? '' }
				: null,
		spoolId: row.spool_id,
		read: row.reading_stage === null ? null : resistanceRead(row)
	}));
}

/** How many runs a filter holds, and their turns. */
export async function bookTotals(
	trx: Trx,
	workshopId: string,
	timeZone: string,
	filter: BookFilter
): Promise<BookTotals> {
	const row = await closedRuns(trx, workshopId, timeZone, filter)
		.select((eb) => [
			eb.fn.countAll<number>().as('runs'),
			// sum of integers is bigint, read as a number: a workshop of a century stays far below 2^53.
			sql<number>`coalesce(sum(run.on_bobbin), 0)::bigint`.as('turns')
		])
		.executeTakeFirstOrThrow();
	return { runs: Number(row.runs), turns: Number(row.turns) };
}

/** Everyone who closed a run, by name, people who left included; `byItself` when the bench ever kept one by itself. */
export async function bookPeople(
	trx: Trx,
	workshopId: string
): Promise<{ people: { id: string; name: string }[]; byItself: boolean }> {
	const people = await trx
		.selectFrom('member')
		.select(['id', 'name'])
		.where('workshop_id', '=', workshopId)
		.where((eb) =>
			eb.exists(
				eb
					.selectFrom('run')
					.select(sql`1`.as('one'))
					.where('run.workshop_id', '=', workshopId)
					.whereRef('run.ended_by', '=', 'member.id')
					.where('run.state', '<>', 'open')
			)
		)
		.orderBy('name')
		.orderBy('id')
		.execute();
	const alone = await trx
		.selectFrom('run')
		.select('id')
		.where('workshop_id', '=', workshopId)
		.where('state', '<>', 'open')
		.where('ended_by', 'is', null)
		.limit(1)
		.executeTakeFirst();
	return { people, byItself: alone !== undefined };
}

function closedRuns(trx: Trx, workshopId: string, timeZone: string, filter: BookFilter) {
	let query = trx
		.selectFrom('run')
		.innerJoin('winder', (join) =>
			join.onRef('winder.workshop_id', '=', 'run.workshop_id').onRef('winder.id', '=', 'run.winder_id')
		)
		.leftJoin('member', (join) =>
			join.onRef('member.workshop_id', '=', 'run.workshop_id').onRef('member.id', '=', 'run.ended_by')
		)
		.leftJoin('spec_revision', (join) =>
			join
				.onRef('spec_revision.workshop_id', '=', 'run.workshop_id')
				.onRef('spec_revision.spec_id', '=', 'run.spec_id')
				.onRef('spec_revision.no', '=', 'run.spec_revision_no')
		)
		.where('run.workshop_id', '=', workshopId)
		.where('run.state', '<>', 'open');
	if (filter.state) query = query.where('run.state', '=', filter.state);
	if (filter.person === 'itself') query = query.where('run.ended_by', 'is', null);
	else if (filter.person) query = query.where('run.ended_by', '=', filter.person);
	// A day begins and ends by the workshop's clock, whatever daylight saving does to its length.
	if (filter.from)
		query = query.where(sql<SqlBool>`run.ended_at >= (${filter.from}::date)::timestamp at time zone ${timeZone}`);
	if (filter.to)
		query = query.where(sql<SqlBool>`run.ended_at < (${filter.to}::date + 1)::timestamp at time zone ${timeZone}`);
	for (const term of filter.terms) {
		if (term.kind === 'turns') {
			const [from, to] = [clampTurns(term.from), clampTurns(term.to)];
			query = query.where('run.on_bobbin', '>=', from).where('run.on_bobbin', '<=', to);
		} else if (term.kind === 'word') {
			query = query.where(holdsText(term.text));
		} else {
			const value = clampTurns(term.value);
			query = query.where((eb) =>
				eb.or([eb('run.on_bobbin', '=', value), eb('run.target', '=', value), holdsText(term.text)])
			);
		}
	}
	return query;
}

/** Numbers beyond what the column holds find nothing instead of raising an error. */
function clampTurns(value: number): number {
	return Math.max(-2_147_483_648, Math.min(2_147_483_647, value));
}

/** Plain containment, so that % and _ are characters like any other. A line end parts the columns: nobody types one. */
function holdsText(text: string): Expression<SqlBool> {
	return sql<SqlBool>`strpos(
		lower(concat_ws(E'\n', run.coil_name, run.sticker, run.note, run.set_aside_reason, spec_revision.name)), lower(${text})) > 0`;
}
