import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { fillDemo, signInsNow } from '../../src/commands/demo.ts';
import { hashPassword } from '../../src/lib/server/auth/passwords.ts';
import { insertMemberWithPassword, insertWorkshop } from '../../src/lib/server/db/admin.ts';
import { judge } from '../../src/lib/coil/band.ts';
import { listWaiting } from '../../src/lib/server/db/coils.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { tracePointsMax } from '../../src/lib/server/db/recorder.ts';
import { factsOfRun, listRuns, traceOfRun } from '../../src/lib/server/db/runs.ts';
import { findRevision, keptReadings, listSpecs } from '../../src/lib/server/db/specs.ts';
import { listSpools } from '../../src/lib/server/db/spools.ts';
import { calibrationOf } from '../../src/lib/spec/kept.ts';
import { predictCoil } from '../../src/lib/spec/model.ts';
import { makeShop, type Shop } from './bench.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db.drop());

it('a demo password that was changed, or whose person is gone, is not shown again', async () => {
	const workshopId = await insertWorkshop(db.owner, {
		shortName: 'demo',
		name: 'Hollow Lane workshop',
		timeZone: 'UTC'
	});
	const person = async (name: string, password: string) =>
		insertMemberWithPassword(db.owner, workshopId, {
			name,
			email: `${name.toLowerCase()}@demo.example`,
			role: 'maker',
			passwordHash: await hashPassword(password)
		});
	await person('Ada', 'spools-of-thin-red-wire');
	await person('Tom', 'a-later-sentence-of-his-own');
	const gone = await person('Ira', 'brushes-and-warm-wax');
	await db.owner.updateTable('member').set({ removed_at: new Date() }).where('id', '=', gone).execute();
	const kept = [
		'owner       ada@demo.example  spools-of-thin-red-wire',
		'maker       tom@demo.example  the-first-sentence-he-had',
		'apprentice  ira@demo.example  brushes-and-warm-wax'
	];
	expect(await signInsNow(db.owner, `${kept.join('\n')}\n`)).toEqual([
		kept[0],
		'maker       tom@demo.example  changed since',
		'apprentice  ira@demo.example  changed since'
	]);
});

describe('the demo workshop', () => {
	const now = new Date('2026-03-02T09:00:00Z');
	const filled = async (): Promise<Shop> => {
		const shop = await makeShop(db);
		await db.owner
			.transaction()
			.execute((trx) => fillDemo(trx, { workshopId: shop.id, winderId: shop.winderId, memberId: shop.ada, now }));
		return shop;
	};
	const runsOf = (shop: Shop) =>
		inWorkshop(db.app, shop.id, async (trx) => {
			const listed = await listRuns(trx, shop.id, { limit: 50 });
			return listed.ok ? listed.runs : [];
		});

	it('begins with the practice coil, and goes on with coils of its specs that fit their bobbins', async () => {
		const shop = await filled();
		const waiting = await inWorkshop(db.app, shop.id, (trx) => listWaiting(trx, shop.id));
		expect(waiting.map(({ name, target, spec }) => [name, target, spec?.no])).toEqual([
			['Practice coil', 1200, undefined],
			['Evening bridge · Screw coil', 5150, 2],
			['Evening bridge · Slug coil', 5050, 2],
			['Lantern single · Coil', 7900, 1]
		]);
		for (const coil of waiting.slice(1)) {
			expect(coil.fullTurns).toBeGreaterThan(coil.target);
			expect(coil.spoolId).not.toBeNull();
		}
		const specs = await inWorkshop(db.app, shop.id, (trx) => listSpecs(trx, shop.id));
		expect(specs.map(({ name, no, made, waiting: n }) => [name, no, made, n])).toEqual([
			['Evening bridge', 2, 6, 2],
			['Lantern single', 1, 0, 1],
			['Wide field', 1, 0, 0]
		]);
		const spools = await inWorkshop(db.app, shop.id, (trx) => listSpools(trx, shop.id));
		expect(spools.map(({ name, coils }) => [name, coils])).toEqual([
			['Brown reel', 0],
			['Red reel', 6]
		]);
	});

	it('has runs in its book whose figures, trace and events tell one story', async () => {
		const shop = await filled();
		const runs = await runsOf(shop);
		expect(runs).toHaveLength(6);
		for (const run of runs) {
			expect(run).toMatchObject({ state: 'kept', endedByName: 'Ada Quill', winderId: shop.winderId });
			expect(Math.abs(run.onBobbin! - run.target)).toBeLessThanOrEqual(run.toleranceTurns);
			expect(run.endedAt!.getTime()).toBeLessThan(now.getTime());
			expect(run.endedAt!.getTime() - run.startedAt!.getTime()).toBe(run.windingMs! + run.stoppedMs!);
			// A hand guides no faster than this, and no winder of the demo turns faster.
			expect(run.rpmTop).toBeLessThan(1000);
			expect(run.rpmMean).toBeGreaterThan(500);
			const [trace, facts] = await inWorkshop(db.app, shop.id, async (trx) => [
				await traceOfRun(trx, shop.id, run.id),
				await factsOfRun(trx, shop.id, run.id)
			]);
			expect(trace!.turns.at(-1)).toBe(run.onBobbin);
			expect(trace!.turns.length).toBeLessThan(tracePointsMax);
			for (let i = 1; i < trace!.turns.length; i += 1) {
				expect(trace!.turns[i]).toBeGreaterThanOrEqual(trace!.turns[i - 1]!);
				expect(trace!.atMs[i]).toBeGreaterThanOrEqual(trace!.atMs[i - 1]!);
			}
			expect(Math.max(...trace!.rpm)).toBeLessThanOrEqual(run.rpmTop!);
			expect(facts.at(0)?.kind).toBe('started');
			expect(facts.at(-1)).toMatchObject({ kind: 'kept', turns: run.onBobbin });
			const times = facts.map(({ at }) => at.getTime());
			expect(times).toEqual([...times].sort((a, b) => a - b));
			expect(facts.filter(({ kind }) => kind === 'look-seen').map(({ detail }) => detail.mark)).toEqual(
				run.looks.map(({ mark }) => mark)
			);
		}
		// The early look is the first coil's of each session.
		expect(runs.map((run) => run.looks[0]?.mark)).toEqual([500, 100, 500, 100, 500, 100]);
	});

	it('has readings that agree with what its specs say, scattered by about half a percent', async () => {
		const shop = await filled();
		await inWorkshop(db.app, shop.id, async (trx) => {
			const [spec] = await listSpecs(trx, shop.id);
			const { content } = spec!;
			const spool = (await listSpools(trx, shop.id)).find(({ id }) => id === content.spoolId)!;
			const kept = await keptReadings(trx, shop.id, { bobbinName: content.bobbin.name, spoolId: spool.id });
			for (const reading of kept) {
				const run = (await runsOf(shop)).find(({ id }) => id === reading.runId)!;
				const revision = await findRevision(trx, shop.id, run.spec!.id, run.spec!.no);
				const predicted = predictCoil(revision!.content, reading.turns, { wire: spool.wire });
				if (!predicted.ok) throw new Error(predicted.field);
				const { value: ohm, uncertainty: uncertaintyOhm } = predicted.value.figures.resistanceOhm;
				const verdict = judge(
					{ ohm: reading.ohmAt20C!, uncertaintyOhm: reading.uncertaintyOhm },
					{ ohm, uncertaintyOhm }
				);
				expect(verdict).toMatchObject({ ok: true, value: { agreement: 'within' } });
			}
			const said = calibrationOf(content, spool.wire, kept);
			expect(said.used).toHaveLength(6);
			expect(said.leftOut).toEqual([]);
			expect(said.calibration!.scatter).toBeGreaterThan(0.003);
			expect(said.calibration!.scatter).toBeLessThan(0.007);
			expect(said.packing?.coils).toBe(4);
			expect(said.permeability?.coils).toBe(2);
		});
	});

	it('is the same each time', async () => {
		const told = async (shop: Shop) => {
			const runs = await runsOf(shop);
			const readings = await inWorkshop(db.app, shop.id, (trx) =>
				trx.selectFrom('reading').select(['kind', 'value', 'taken_at']).orderBy('taken_at').orderBy('kind').execute()
			);
			return { readings, ended: runs.map(({ endedAt, turns, rpmMean }) => [endedAt, turns, rpmMean]) };
		};
		expect(await told(await filled())).toEqual(await told(await filled()));
	});
});
