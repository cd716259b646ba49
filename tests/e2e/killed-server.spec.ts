import { wholeText } from '../../src/lib/format.ts';
import { BenchPage, simulate } from './bench-page.ts';
import { HandWinder, handSettings } from './hand-winder.ts';
import { expect, test } from './fixtures.ts';

test('a server killed while a coil is wound loses no turn, and the screen comes back by itself', async ({
	server,
	screenOf,
	troubles
}) => {
	troubles.expectNoServer();
	const speedUp = 10;
	const winder = await server.addWinder({ timeScale: speedUp });
	await server.addCoil({ name: 'Bridge', target: 1_500, lookEvery: 0 });
	const page = await screenOf(server, server.workshop.maker);
	const bench = await new BenchPage(page).open(server, winder);
	const sim = simulate(server, winder, { carrier: 'ws', speedUp });
	try {
		await expect(bench.tap('Start this coil')).toBeVisible();
		await page.evaluate(() => Reflect.set(window, 'neverReloaded', true));
		await sim.goOn('preparing');
		await expect.poll(() => sim.device.turns ?? 0).toBeGreaterThan(300);
		await expect(bench.word).toHaveText('Winding');

		await server.kill();
		await expect(bench.says('no connection to the server')).toBeVisible();
		await expect(bench.word).toHaveText('No signal');
		const turnsAtStart = sim.device.turns!;
		await server.start();
		await expect(bench.word).toHaveText(/^(Winding|Ease off|Stop|On the mark|\d+ (over|short))$/);
		expect(sim.device.turns).toBeGreaterThanOrEqual(turnsAtStart);

		await expect.poll(() => sim.reached().length, { timeout: 60_000 }).toBe(1);
		const wound = sim.reached()[0]!;
		await expect(bench.count).toHaveText(wholeText(wound));
		await bench.keep.click();
		await expect(bench.word).toHaveText('Kept');
		expect(await page.evaluate(() => Reflect.get(window, 'neverReloaded') as unknown)).toBe(true);

		const runs = () => server.database.owner.selectFrom('run').select(['state', 'turns', 'on_bobbin']).execute();
		await expect.poll(runs).toEqual([{ state: 'kept', turns: wound, on_bobbin: wound }]);
		const result = await sim.simulation.stop(20_000);
		expect(result.allAcknowledged).toBe(true);
		const [truth] = result.winders[0]!.boots;
		const kept = await server.database.owner
			.selectFrom('kept_line')
			.select(['e', 'k', 'f', 'v'])
			.where('k', 'is not', null)
			.where('boot', '=', truth!.boot)
			.orderBy('e')
			.execute();
		expect(kept).toEqual(truth!.events.map(({ e, k, f, v }) => ({ e, k, f, v })));
	} finally {
		await sim.simulation.stop(0);
	}
});

test('a tap made while the server is down waits, says so, and arrives once', async ({ server, screenOf, troubles }) => {
	troubles.expectNoServer();
	const winder = await server.addWinder(handSettings);
	await server.addCoil({ name: 'Bridge', target: 300, lookEvery: 0 });
	const page = await screenOf(server, server.workshop.apprentice);
	const bench = await new BenchPage(page).open(server, winder);
	const hand = new HandWinder(server, winder);
	try {
		await hand.link();
		await hand.wind(300);
		await expect(bench.word).toHaveText('On the mark');
		await server.kill();
		await bench.keep.click();
		await expect(bench.says('waiting to save (1)')).toBeVisible();
		await expect(bench.keep).toBeDisabled();
		await server.start();
		await expect(bench.word).toHaveText('Kept');
		await expect(bench.says('waiting to save')).toHaveCount(0);

		const { owner } = server.database;
		const runs = () => owner.selectFrom('run').select(['state', 'on_bobbin']).execute();
		await expect.poll(runs).toEqual([{ state: 'kept', on_bobbin: 300 }]);
		const kept = await owner.selectFrom('fact').select('kind').where('kind', 'in', ['kept', 'undone']).execute();
		expect(kept).toEqual([{ kind: 'kept' }]);
	} finally {
		await hand.end();
	}
});
