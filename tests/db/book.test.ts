import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { wholeBook, type BookFilter, type BookSort } from '../../src/lib/book-filter.ts';
import { bookPeople, bookTotals, listBook } from '../../src/lib/server/db/book.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { parseFind } from '../../src/routes/(workshop)/book/find.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let hollow: Shop;
let other: Shop;

interface Shop {
	id: string;
	winderId: string;
	people: { ada: string; bo: string };
}

interface Wound {
	name: string;
	endedAt: string;
	target: number;
	onBobbin: number;
	who?: string | null;
	state?: 'kept' | 'set-aside' | 'open';
	reason?: string;
	note?: string;
	sticker?: string;
	windingMs?: number;
}

async function shop(shortName: string): Promise<Shop> {
	const { id } = await db.owner
		.insertInto('workshop')
		.values({ short_name: shortName, name: shortName, time_zone: 'America/New_York' })
		.returning('id')
		.executeTakeFirstOrThrow();
	const person = async (name: string) =>
		(
			await db.owner
				.insertInto('member')
				.values({ workshop_id: id, email: `${name.toLowerCase()}@${shortName}.example`, name, role: 'maker' })
				.returning('id')
				.executeTakeFirstOrThrow()
		).id;
	const winder = await db.owner
		.insertInto('winder')
		.values({ workshop_id: id, name: 'w-01' })
		.returning('id')
		.executeTakeFirstOrThrow();
	return { id, winderId: winder.id, people: { ada: await person('Ada'), bo: await person('Bo') } };
}

async function wind(at: Shop, wound: Wound): Promise<string> {
	const coilId = randomUUID();
	const plan = { target: wound.target, look_every: 500, direction: 'counter-clockwise' as const };
	await db.owner
		.insertInto('coil')
		.values({ workshop_id: at.id, id: coilId, name: wound.name, ...plan, place: 1, state: 'wound' })
		.execute();
	const open = wound.state === 'open';
	const { id } = await db.owner
		.insertInto('run')
		.values({
			workshop_id: at.id,
			coil_id: coilId,
			winder_id: at.winderId,
			coil_name: wound.name,
			...plan,
			top_faces: 'out',
			tolerance_turns: 5,
			state: wound.state ?? 'kept',
			set_aside_reason: wound.reason ?? null,
			taken_at: wound.endedAt,
			started_at: wound.endedAt,
			ended_at: open ? null : wound.endedAt,
			ended_by: wound.who === undefined ? at.people.ada : wound.who,
			sticker: wound.sticker ?? randomUUID().slice(0, 8),
			turns: open ? null : wound.onBobbin,
			on_bobbin: open ? null : wound.onBobbin,
			winding_ms: open ? null : (wound.windingMs ?? 600_000),
			stopped_ms: open ? null : 60_000,
			rpm_mean: open ? null : 448,
			rpm_top: open ? null : 612,
			taken_back: 0,
			note: wound.note ?? ''
		})
		.returning('id')
		.executeTakeFirstOrThrow();
	return id;
}

async function namesOf(filter: Partial<BookFilter>, sort: BookSort = 'when', descending = true): Promise<string[]> {
	const lines = await inWorkshop(db.app, hollow.id, (trx) =>
		listBook(
			trx,
			hollow.id,
			'America/New_York',
			{ ...wholeBook, ...filter },
			{ sort, descending, offset: 0, limit: 50 }
		)
	);
	return lines.map((line) => line.name);
}

beforeAll(async () => {
	db = await freshDatabase();
	hollow = await shop('hollow-lane');
	other = await shop('other');
	// New York is UTC−5 in winter: the night of 1 December there ends at 05:00 UTC on the 2nd.
	await wind(hollow, {
		name: 'Middle',
		endedAt: '2026-12-01T20:02:00Z',
		target: 7600,
		onBobbin: 7601,
		sticker: 'K7F3'
	});
	await wind(hollow, {
		name: 'Trial 100%_thin',
		endedAt: '2026-12-02T04:59:59Z',
		target: 6400,
		onBobbin: 6402,
		who: hollow.people.bo
	});
	await wind(hollow, {
		name: 'Neck slug',
		endedAt: '2026-12-02T05:00:00Z',
		target: 4780,
		onBobbin: 2316,
		state: 'set-aside',
		reason: 'wire snapped'
	});
	await wind(hollow, {
		name: 'Bridge slug',
		endedAt: '2026-12-02T15:20:00Z',
		target: 5240,
		onBobbin: 5241,
		who: null,
		note: 'wire from the Blue spool'
	});
	await wind(hollow, {
		name: 'Bridge screw',
		endedAt: '2026-12-02T15:41:00Z',
		target: 5320,
		onBobbin: 5320,
		windingMs: 712_000
	});
	await wind(hollow, {
		name: 'On the bench',
		endedAt: '2026-12-02T16:00:00Z',
		target: 5320,
		onBobbin: 0,
		state: 'open'
	});
	await wind(other, { name: 'Theirs', endedAt: '2026-12-02T15:00:00Z', target: 5320, onBobbin: 5320 });
});

afterAll(async () => {
	await db?.drop();
});

describe('the bench book', () => {
	it('holds what is kept and what is set aside of this workshop, newest first, and nothing open', async () => {
		expect(await namesOf({})).toEqual(['Bridge screw', 'Bridge slug', 'Neck slug', 'Trial 100%_thin', 'Middle']);
	});

	it('shows nothing of another workshop even when a query names it', async () => {
		const lines = await inWorkshop(db.app, hollow.id, (trx) =>
			listBook(trx, other.id, 'UTC', wholeBook, { sort: 'when', descending: true, offset: 0, limit: 50 })
		);
		expect(lines).toEqual([]);
	});

	it('gives each line its figures, its person and its reason', async () => {
		const lines = await inWorkshop(db.app, hollow.id, (trx) =>
			listBook(trx, hollow.id, 'UTC', wholeBook, { sort: 'when', descending: true, offset: 0, limit: 3 })
		);
		expect(lines[0]).toMatchObject({
			winderName: 'w-01',
			target: 5320,
			onBobbin: 5320,
			windingMs: 712_000,
			stoppedMs: 60_000,
			rpmMean: 448,
			who: 'Ada',
			state: 'kept',
			endedAt: new Date('2026-12-02T15:41:00Z')
		});
		expect(lines[1]?.who).toBeNull();
		expect(lines[2]).toMatchObject({ state: 'set-aside', reason: 'wire snapped' });
	});

	it('adds up runs and turns of what is found', async () => {
		const totals = (filter: BookFilter) =>
			inWorkshop(db.app, hollow.id, (trx) => bookTotals(trx, hollow.id, 'America/New_York', filter));
		expect(await totals(wholeBook)).toEqual({ runs: 5, turns: 7601 + 6402 + 2316 + 5241 + 5320 });
		expect(await totals({ ...wholeBook, state: 'set-aside' })).toEqual({ runs: 1, turns: 2316 });
		expect(await totals({ ...wholeBook, terms: parseFind('nowhere') })).toEqual({ runs: 0, turns: 0 });
	});

	it('finds by words of name, sticker, note and reason, whatever the case, all of them', async () => {
		expect(await namesOf({ terms: parseFind('BRIDGE') })).toEqual(['Bridge screw', 'Bridge slug']);
		expect(await namesOf({ terms: parseFind('slug bridge') })).toEqual(['Bridge slug']);
		expect(await namesOf({ terms: parseFind('k7f3') })).toEqual(['Middle']);
		expect(await namesOf({ terms: parseFind('blue spool') })).toEqual(['Bridge slug']);
		expect(await namesOf({ terms: parseFind('"wire snapped"') })).toEqual(['Neck slug']);
	});

	it('takes % and _ for themselves', async () => {
		expect(await namesOf({ terms: [{ kind: 'word', text: '%_' }] })).toEqual(['Trial 100%_thin']);
		expect(await namesOf({ terms: [{ kind: 'word', text: 'M_ddle' }] })).toEqual([]);
	});

	it('finds by turns, exactly or with a spread', async () => {
		expect(await namesOf({ terms: parseFind('bridge, 5,300 ± 100 turns') })).toEqual(['Bridge screw', 'Bridge slug']);
		expect(await namesOf({ terms: parseFind('5,320') })).toEqual(['Bridge screw']);
		// Wanted counts for a bare number, what is on the bobbin alone for turns.
		expect(await namesOf({ terms: parseFind('4780') })).toEqual(['Neck slug']);
		expect(await namesOf({ terms: parseFind('4780 turns') })).toEqual([]);
	});

	it('finds nothing, without an error, by a number no column holds', async () => {
		expect(await namesOf({ terms: parseFind('999999999 ± 999999999') })).toHaveLength(5);
		expect(await namesOf({ terms: [{ kind: 'number', value: 9e14, text: '900000000000000' }] })).toEqual([]);
		expect(await namesOf({ terms: [{ kind: 'turns', from: 9e14, to: 9e15 }] })).toEqual([]);
	});

	it('cuts days by the clock of the workshop', async () => {
		expect(await namesOf({ to: '2026-12-01' })).toEqual(['Trial 100%_thin', 'Middle']);
		expect(await namesOf({ from: '2026-12-02' })).toEqual(['Bridge screw', 'Bridge slug', 'Neck slug']);
		expect(await namesOf({ from: '2026-12-01', to: '2026-12-01' })).toEqual(['Trial 100%_thin', 'Middle']);
	});

	it('finds by person, and what the bench kept by itself', async () => {
		expect(await namesOf({ person: hollow.people.bo })).toEqual(['Trial 100%_thin']);
		expect(await namesOf({ person: 'itself' })).toEqual(['Bridge slug']);
		expect(await namesOf({ person: other.people.ada })).toEqual([]);
	});

	it('lists the people who closed runs', async () => {
		expect(await inWorkshop(db.app, hollow.id, (trx) => bookPeople(trx, hollow.id))).toEqual({
			people: [
				{ id: hollow.people.ada, name: 'Ada' },
				{ id: hollow.people.bo, name: 'Bo' }
			],
			byItself: true
		});
	});

	it.each<[BookSort, string, string]>([
		['coil', 'Bridge screw', 'Trial 100%_thin'],
		['wanted', 'Neck slug', 'Middle'],
		['wound', 'Neck slug', 'Middle'],
		['winding', 'Bridge slug', 'Bridge screw'],
		['state', 'Bridge screw', 'Neck slug']
	])('sorts by %s both ways', async (sort, first, last) => {
		expect((await namesOf({}, sort, false))[0]).toBe(first);
		expect((await namesOf({}, sort, true))[0]).toBe(last);
	});

	it('sorts by how far off, and a run set aside stands last either way', async () => {
		expect(await namesOf({}, 'off', false)).toEqual([
			'Bridge screw',
			'Bridge slug',
			'Middle',
			'Trial 100%_thin',
			'Neck slug'
		]);
		expect((await namesOf({}, 'off', true)).at(-1)).toBe('Neck slug');
	});

	it('comes in pages that join without a gap or a double', async () => {
		const all: string[] = [];
		for (let offset = 0; offset < 6; offset += 2) {
			const lines = await inWorkshop(db.app, hollow.id, (trx) =>
				listBook(trx, hollow.id, 'UTC', wholeBook, { sort: 'rpm', descending: false, offset, limit: 2 })
			);
			all.push(...lines.map((line) => line.id));
		}
		expect(all).toHaveLength(5);
		expect(new Set(all).size).toBe(5);
	});
});
