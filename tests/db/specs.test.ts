import { randomUUID } from 'node:crypto';
import { sql, type Transaction } from 'kysely';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { addCoil, coilLimits, editCoil, findCoil, listWaiting, takeNextCoil } from '../../src/lib/server/db/coils.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { findRun, setRunSpool } from '../../src/lib/server/db/runs.ts';
import type { Database } from '../../src/lib/server/db/schema.ts';
import {
	addSpec,
	findRevision,
	findSpec,
	listSpecChoices,
	listSpecs,
	pickupsAtOnceMax,
	putAway,
	saveSpec,
	windSpec,
	type Revision,
	type Save
} from '../../src/lib/server/db/specs.ts';
import { addSpool } from '../../src/lib/server/db/spools.ts';
import type { SpecContent } from '../../src/lib/spec/content.ts';
import { fullTurnsOf } from '../../src/lib/spec/model.ts';
import { startingSpec } from '../../src/lib/spec/start.ts';
import { makeShop, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let shop: Shop;
let other: Shop;

beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db.drop());
beforeEach(async () => {
	shop = await makeShop(db);
	other = await makeShop(db);
});

const here = <T>(work: (trx: Transaction<Database>) => Promise<T>) => inWorkshop(db.app, shop.id, work);
const there = <T>(work: (trx: Transaction<Database>) => Promise<T>) => inWorkshop(db.app, other.id, work);

const evening = (): SpecContent => {
	const content = startingSpec('two-coils', 'Evening bridge');
	content.coils[0]!.turns = 4950;
	content.coils[1]!.turns = 4850;
	content.coils[0]!.start = 'through the inner eyelet';
	content.coils[0]!.finish = 'under the last layer';
	content.coils[1]!.direction = 'clockwise';
	content.coils[1]!.toleranceTurns = 3;
	return content;
};
const withTurns = (content: SpecContent, turns: number): SpecContent => ({
	...content,
	coils: content.coils.map((coil, i) => (i === 0 ? { ...coil, turns } : coil))
});

const add = (content = evening()) => here((trx) => addSpec(trx, shop.id, content, shop.ada));
const found = async (specId: string) => {
	const spec = await here((trx) => findSpec(trx, shop.id, specId));
	if (!spec) throw new Error('no spec');
	return spec;
};
const on = (base: Revision, content: SpecContent, more: Partial<Save> = {}): Save => ({
	baseNo: base.no,
	baseSavedAt: base.savedAt,
	content,
	why: '',
	by: shop.ada,
	asNew: false,
	...more
});
const save = (specId: string, what: Save) => here((trx) => saveSpec(trx, shop.id, specId, what));
const wind = (specId: string, no: number, more: { pickups?: number; spoolId?: string | null } = {}) =>
	here((trx) => windSpec(trx, shop.id, { specId, no, pickups: 1, spoolId: null, by: shop.ada, ...more }));
const spool = (shopId: string, name = 'Red reel') =>
	inWorkshop(db.app, shopId, async (trx) => {
		const wire = { ...evening().wire, ohmPerM: 5.3, overallDiameterM: 0.00007 };
		const added = await addSpool(trx, shopId, { name, lot: '', wire, note: '' }, null);
		if (!added.ok) throw new Error(added.why);
		return { id: added.id, wire };
	});

describe('a spec', () => {
	it('comes back as it was written, revision 1, with who wrote it', async () => {
		const content = evening();
		const spec = await found(await add(content));
		expect(spec.latest).toMatchObject({ no: 1, name: 'Evening bridge', createdByName: 'Ada Quill', usedAt: null });
		expect(spec.latest.content).toEqual(content);
		expect(spec).toMatchObject({ putAwayAt: null, made: 0 });
	});

	it('whose stored document no longer fits the schema is an error, never half a spec', async () => {
		const specId = await add();
		await db.owner
			.updateTable('spec_revision')
			.set({ content: JSON.stringify({ ...evening(), coils: [] }) })
			.where('spec_id', '=', specId)
			.execute();
		await expect(here((trx) => findSpec(trx, shop.id, specId))).rejects.toThrow();
		await db.owner.deleteFrom('spec_revision').where('spec_id', '=', specId).execute();
		await expect(here((trx) => findSpec(trx, shop.id, specId))).rejects.toThrow('no revision');
	});

	it('that is not used yet is written over, by whoever saves it', async () => {
		const specId = await add();
		const { latest } = await found(specId);
		const saved = await save(specId, on(latest, withTurns(evening(), 5000), { why: 'hotter', by: null }));
		expect(saved).toEqual({ ok: true, no: 1, made: 'same' });
		const spec = await found(specId);
		expect(spec.revisions).toHaveLength(1);
		expect(spec.latest).toMatchObject({ no: 1, why: 'hotter', createdByName: null });
		expect(spec.latest.content.coils[0]!.turns).toBe(5000);
		expect(spec.latest.savedAt.getTime()).toBeGreaterThan(latest.savedAt.getTime());
	});

	it('gets a numbered revision when asked for one, though the latest is not used', async () => {
		const specId = await add();
		const { latest } = await found(specId);
		const saved = await save(specId, on(latest, withTurns(evening(), 5000), { asNew: true }));
		expect(saved).toEqual({ ok: true, no: 2, made: 'new' });
		expect((await found(specId)).revisions.map(({ no }) => no)).toEqual([2, 1]);
	});

	it('is frozen by use: saving makes the next revision, and the used one stays as it was', async () => {
		const specId = await add();
		await wind(specId, 1);
		const before = (await found(specId)).latest;
		expect(before.usedAt).toBeInstanceOf(Date);
		for (const [no, turns] of [
			[2, 5000],
			[3, 5100]
		] as const) {
			const saved = await save(specId, on((await found(specId)).latest, withTurns(evening(), turns)));
			expect(saved).toEqual({ ok: true, no, made: 'new' });
			await wind(specId, no);
		}
		const first = await here((trx) => findRevision(trx, shop.id, specId, 1));
		expect(first).toEqual(before);
		const third = await here((trx) => findRevision(trx, shop.id, specId, 3));
		expect(third?.content.coils[0]!.turns).toBe(5100);
	});

	it('saved with nothing changed makes no revision, also when it was sent twice', async () => {
		const specId = await add();
		await wind(specId, 1);
		const { latest } = await found(specId);
		expect(await save(specId, on(latest, evening(), { asNew: true }))).toEqual({
			ok: true,
			no: 1,
			made: 'nothing-new'
		});
		const change = on(latest, withTurns(evening(), 5000));
		expect(await save(specId, change)).toMatchObject({ no: 2, made: 'new' });
		expect(await save(specId, change)).toEqual({ ok: true, no: 2, made: 'nothing-new' });
	});

	it('not used yet takes another reason for the same content', async () => {
		const specId = await add();
		const { latest } = await found(specId);
		expect(await save(specId, on(latest, evening(), { why: 'a first try' }))).toMatchObject({ made: 'same' });
		expect((await found(specId)).latest.why).toBe('a first try');
	});

	it('saved by two at once: the second is told what the first wrote, and nothing is lost', async () => {
		const specId = await add();
		const { latest } = await found(specId);
		const both = await Promise.all([
			save(specId, on(latest, withTurns(evening(), 5000))),
			save(specId, on(latest, withTurns(evening(), 5200)))
		]);
		const [first] = both.filter((saved) => saved.ok);
		const [second] = both.filter((saved) => !saved.ok);
		expect(first).toMatchObject({ ok: true, no: 1, made: 'same' });
		expect(second).toMatchObject({ ok: false, why: 'changed-meanwhile' });
		const now = (await found(specId)).latest;
		expect(second && !second.ok && second.why === 'changed-meanwhile' && second.latest).toEqual(now);
		expect([5000, 5200]).toContain(now.content.coils[0]!.turns);
	});

	it('saved by many at once gets one revision each time and no gap', async () => {
		const specId = await add();
		for (let round = 0; round < 4; round += 1) {
			const { latest } = await found(specId);
			const all = await Promise.all(
				[1, 2, 3].map((i) => save(specId, on(latest, withTurns(evening(), 5000 + 10 * round + i), { asNew: true })))
			);
			expect(all.filter((saved) => saved.ok)).toHaveLength(1);
		}
		expect((await found(specId)).revisions.map(({ no }) => no)).toEqual([5, 4, 3, 2, 1]);
	});

	it('saved while it goes to the queue is never wound otherwise than it was frozen', async () => {
		for (let round = 0; round < 5; round += 1) {
			const specId = await add();
			const { latest } = await found(specId);
			await Promise.all([wind(specId, 1), save(specId, on(latest, withTurns(evening(), 5000)))]);
			const frozen = await here((trx) => findRevision(trx, shop.id, specId, 1));
			const coils = (await here((trx) => listWaiting(trx, shop.id))).filter((coil) => coil.spec?.id === specId);
			expect(coils[0]?.target).toBe(frozen?.content.coils[0]!.turns);
		}
	});

	it('of another workshop, unknown, or no id at all is not found', async () => {
		const specId = await add();
		const { latest } = await found(specId);
		for (const id of [specId, randomUUID(), 'no-id']) {
			expect(await there((trx) => findSpec(trx, other.id, id))).toBeNull();
			expect(await there((trx) => findRevision(trx, other.id, id, 1))).toBeNull();
			expect(await there((trx) => saveSpec(trx, other.id, id, on(latest, evening())))).toMatchObject({
				why: 'not-found'
			});
			expect(await there((trx) => putAway(trx, other.id, id, true))).toBe('not-found');
			const wound = there((trx) => windSpec(trx, other.id, { specId: id, no: 1, pickups: 1, spoolId: null, by: null }));
			expect(await wound).toEqual({ ok: false, why: 'not-found' });
		}
		expect(await there((trx) => listSpecs(trx, other.id))).toEqual([]);
		for (const no of [0, 2, 1.5, -1, NaN, 1e9]) {
			expect(await here((trx) => findRevision(trx, shop.id, specId, no))).toBeNull();
		}
	});
});

describe('the list of specs', () => {
	it('has the one saved last first, with what was made of it and what waits', async () => {
		const bridge = await add();
		const tall = await add(startingSpec('one-coil', 'Tall'));
		await save(bridge, on((await found(bridge)).latest, withTurns(evening(), 5000)));
		await wind(bridge, 1, { pickups: 2 });
		const taken = await here((trx) => takeNextCoil(trx, shop.id, shop.winderId, new Date()));
		await db.owner.updateTable('run').set({ state: 'kept' }).where('id', '=', taken!.runId).execute();
		await save(bridge, on((await found(bridge)).latest, withTurns(evening(), 5100)));
		const list = await here((trx) => listSpecs(trx, shop.id));
		expect(list.map(({ id }) => id)).toEqual([bridge, tall]);
		expect(list[0]).toMatchObject({ name: 'Evening bridge', no: 2, revisions: 2, usedAt: null, made: 1, waiting: 3 });
		expect(list[0]!.content.coils[0]!.turns).toBe(5100);
		expect(list[1]).toMatchObject({ name: 'Tall', no: 1, revisions: 1, made: 0, waiting: 0 });
		expect((await found(bridge)).made).toBe(1);
	});

	it('to choose from has the latest name and bobbin of each, in the same order', async () => {
		const [first, second] = [await add(), await add(startingSpec('one-coil', 'Evening neck'))];
		const content = { ...evening(), name: 'Morning bridge', bobbin: { ...evening().bobbin, name: 'Maple form' } };
		await save(first, on((await found(first)).latest, content, { asNew: true }));
		const choices = await here((trx) => listSpecChoices(trx, shop.id));
		expect(choices.map(({ id, no, name, bobbin }) => [id, no, name, bobbin.name])).toEqual([
			[first, 2, 'Morning bridge', 'Maple form'],
			[second, 1, 'Evening neck', startingSpec('one-coil', 'x').bobbin.name]
		]);
		await here((trx) => putAway(trx, shop.id, second, true));
		expect((await here((trx) => listSpecChoices(trx, shop.id))).map(({ id }) => id)).toEqual([first]);
		expect(await there((trx) => listSpecChoices(trx, other.id))).toEqual([]);
	});

	it('leaves out what was put away, which is not wound until it is taken out again', async () => {
		const specId = await add();
		expect(await here((trx) => putAway(trx, shop.id, specId, true))).toBe('ok');
		const since = (await found(specId)).putAwayAt;
		expect(await here((trx) => putAway(trx, shop.id, specId, true))).toBe('ok');
		expect((await found(specId)).putAwayAt).toEqual(since);
		expect(await here((trx) => listSpecs(trx, shop.id))).toEqual([]);
		expect(await here((trx) => listSpecs(trx, shop.id, { putAway: true }))).toHaveLength(1);
		expect(await wind(specId, 1)).toEqual({ ok: false, why: 'put-away' });
		expect((await found(specId)).latest.usedAt).toBeNull();
		expect(await here((trx) => putAway(trx, shop.id, specId, false))).toBe('ok');
		expect(await wind(specId, 1)).toMatchObject({ ok: true });
	});
});

describe('winding by a spec', () => {
	it('queues the coils of each pickup together, behind what waits, with all the bench needs', async () => {
		await here((trx) =>
			addCoil(
				trx,
				shop.id,
				{
					name: 'Before',
					note: '',
					target: 100,
					lookEvery: 0,
					direction: 'clockwise',
					topFaces: 'out',
					toleranceTurns: 5
				},
				{ createdBy: null }
			)
		);
		const reel = await spool(shop.id);
		const specId = await add();
		const wound = await wind(specId, 1, { pickups: 2, spoolId: reel.id });
		if (!wound.ok) throw new Error(wound.why);
		const waiting = await here((trx) => listWaiting(trx, shop.id));
		expect(waiting.map(({ name }) => name)).toEqual([
			'Before',
			'Evening bridge · Screw coil',
			'Evening bridge · Slug coil',
			'Evening bridge · Screw coil',
			'Evening bridge · Slug coil'
		]);
		expect(waiting.slice(1)).toEqual(wound.coils);
		expect(waiting[1]).toMatchObject({
			target: 4950,
			lookEvery: 500,
			firstLook: 100,
			direction: 'counter-clockwise',
			topFaces: 'out',
			toleranceTurns: 5,
			note: 'Start: through the inner eyelet\nFinish: under the last layer',
			spec: { id: specId, no: 1, coil: 0 },
			spoolId: reel.id,
			// The spool's wire, not the spec's.
			fullTurns: fullTurnsOf(evening(), reel.wire)
		});
		expect(waiting[1]!.fullTurns).not.toBe(fullTurnsOf(evening()));
		expect(waiting[2]).toMatchObject({
			target: 4850,
			// The early look is the first coil's alone.
			firstLook: 0,
			direction: 'clockwise',
			toleranceTurns: 3,
			note: '',
			spec: { id: specId, no: 1, coil: 1 }
		});
	});

	it('takes an older revision as well, and one without flange, spool or looks', async () => {
		const plain = evening();
		plain.bobbin.flangeOuterM = null;
		plain.looks = { every: 0, first: 0 };
		const specId = await add(plain);
		await save(specId, on((await found(specId)).latest, withTurns(plain, 5000), { asNew: true }));
		const wound = await wind(specId, 1);
		if (!wound.ok) throw new Error(wound.why);
		expect(wound.coils[0]).toMatchObject({
			target: 4950,
			lookEvery: 0,
			firstLook: 0,
			fullTurns: null,
			spoolId: null,
			spec: { no: 1 }
		});
		const { latest } = await found(specId);
		expect(latest).toMatchObject({ no: 2, usedAt: null });
	});

	it('makes a name of two long ones that the queue can hold', async () => {
		const long = evening();
		long.name = 'Æ'.repeat(80);
		long.coils[0]!.name = '🎸'.repeat(80);
		const wound = await wind(await add(long), 1);
		if (!wound.ok) throw new Error(wound.why);
		const names = wound.coils.map(({ name }) => name);
		for (const name of names) expect([...name]).toHaveLength(coilLimits.nameMax);
		expect(names[0]).toMatch(/^Æ+… · (🎸)+…$/u);
		expect(names[1]).toMatch(/^Æ+… · Slug coil$/);
	});

	it('with another workshop’s spool, an unknown revision or too many pickups queues nothing', async () => {
		const foreign = await spool(other.id);
		const specId = await add();
		for (const spoolId of [foreign.id, randomUUID(), 'no-id']) {
			expect(await wind(specId, 1, { spoolId })).toEqual({ ok: false, why: 'not-found' });
		}
		expect(await wind(specId, 2)).toEqual({ ok: false, why: 'not-found' });
		for (const pickups of [0, pickupsAtOnceMax + 1, 1.5, NaN]) {
			await expect(wind(specId, 1, { pickups })).rejects.toThrow(RangeError);
		}
		expect(await here((trx) => listWaiting(trx, shop.id))).toEqual([]);
		expect((await found(specId)).latest.usedAt).toBeNull();
	});

	it('gives the bench its early look and the turns that fill the bobbin, and the run its spec and spool', async () => {
		const reel = await spool(shop.id);
		const specId = await add();
		await wind(specId, 1, { spoolId: reel.id });
		const taken = await here((trx) => takeNextCoil(trx, shop.id, shop.winderId, new Date()));
		const fullTurns = fullTurnsOf(evening(), reel.wire);
		expect(taken?.plan).toMatchObject({ firstLook: 100, fullTurns });
		const run = await here((trx) => findRun(trx, shop.id, taken!.runId));
		expect(run).toMatchObject({
			spec: { id: specId, no: 1, coil: 0 },
			spoolId: reel.id,
			firstLook: 100,
			fullTurns
		});
		const coil = await here((trx) => findCoil(trx, shop.id, run!.coilId));
		expect(coil).toMatchObject({ state: 'on-bench', spec: run!.spec });
	});

	it('leaves a coil its tolerance and its spec when the queue changes how many turns it gets', async () => {
		const specId = await add();
		const wound = await wind(specId, 1);
		if (!wound.ok) throw new Error(wound.why);
		const slug = wound.coils[1]!;
		const { name, note, lookEvery, direction, topFaces } = slug;
		const changed = { name, note, lookEvery, direction, topFaces, target: 4800 };
		expect(await here((trx) => editCoil(trx, shop.id, slug.id, changed))).toBe('waiting');
		expect(await here((trx) => findCoil(trx, shop.id, slug.id))).toEqual({ ...slug, target: 4800 });
	});

	it('leaves a coil queued by hand without any of it', async () => {
		const coil = await here((trx) =>
			addCoil(
				trx,
				shop.id,
				{
					name: 'Practice',
					note: '',
					target: 100,
					lookEvery: 0,
					direction: 'clockwise',
					topFaces: 'out',
					toleranceTurns: 5
				},
				{ createdBy: null }
			)
		);
		expect(coil).toMatchObject({ spec: null, spoolId: null, firstLook: null, fullTurns: null });
		const taken = await here((trx) => takeNextCoil(trx, shop.id, shop.winderId, new Date()));
		expect(taken?.plan).toMatchObject({ firstLook: null, fullTurns: null });
	});
});

describe('the spool of a run', () => {
	it('is said or taken back afterwards; a foreign one is not found', async () => {
		const specId = await add();
		await wind(specId, 1);
		const taken = await here((trx) => takeNextCoil(trx, shop.id, shop.winderId, new Date()));
		const runId = taken!.runId;
		const reel = await spool(shop.id);
		const foreign = await spool(other.id);
		const spoolOf = async () => (await here((trx) => findRun(trx, shop.id, runId)))?.spoolId;
		expect(await here((trx) => setRunSpool(trx, shop.id, runId, reel.id))).toBe('ok');
		expect(await spoolOf()).toBe(reel.id);
		for (const id of [foreign.id, randomUUID(), 'no-id']) {
			expect(await here((trx) => setRunSpool(trx, shop.id, runId, id))).toBe('not-found');
		}
		expect(await there((trx) => setRunSpool(trx, other.id, runId, foreign.id))).toBe('not-found');
		expect(await here((trx) => setRunSpool(trx, shop.id, 'no-id', reel.id))).toBe('not-found');
		expect(await spoolOf()).toBe(reel.id);
		expect(await here((trx) => setRunSpool(trx, shop.id, runId, null))).toBe('ok');
		expect(await spoolOf()).toBeNull();
	});
});

it('a stored name keeps to what the table holds', async () => {
	const { rows } = await sql<{ name: string }>`
		select pg_get_constraintdef(c.oid) as name from pg_constraint c
		where c.conrelid = 'coil'::regclass and pg_get_constraintdef(c.oid) like '%char_length(name)%'`.execute(db.owner);
	expect(rows[0]?.name).toContain(`<= ${coilLimits.nameMax}`);
});
