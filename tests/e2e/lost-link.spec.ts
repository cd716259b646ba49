import { BenchPage } from './bench-page.ts';
import { HandWinder, handSettings } from './hand-winder.ts';
import { expect, test } from './fixtures.ts';

test('a coil kept and the next begun while the link was down each get their own turns when the lines arrive', async ({
	shop,
	screenOf
}) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Screw coil', target: 5_320, lookEvery: 0 }, workshop);
	await server.addCoil({ name: 'Slug coil', target: 5_300, lookEvery: 0 }, workshop);
	const page = await screenOf(server, workshop.maker);
	const bench = await new BenchPage(page).open(server, winder);
	const hand = new HandWinder(server, winder);
	try {
		await hand.link();
		await hand.turn(5_100);
		await expect(bench.count).toHaveText('5,100');
		await expect(bench.word).toHaveText('Winding');

		await hand.unlink();
		await hand.turn(220);
		await hand.stop();
		await expect(bench.word).toHaveText('No signal');
		await expect(bench.count).toHaveText('5,100');
		await bench.tap('Keep as it is').click();
		await expect(bench.says('waiting for the winder’s lines')).toBeVisible();
		await hand.turn(150);

		await hand.link();
		await expect(page.getByRole('heading', { name: 'Slug coil' })).toBeVisible();
		await expect(bench.count).toHaveText('150');
		await expect(bench.word).toHaveText('Winding');
		await hand.stop();

		await page.goto(`${server.url}/book`);
		const row = page.getByRole('row').filter({ hasText: 'Screw coil' });
		await expect(row.getByRole('cell', { name: '5,320', exact: true })).toHaveCount(2);
		await expect(row.getByRole('cell', { name: 'kept', exact: true })).toBeVisible();
		await expect(page.getByRole('row').filter({ hasText: 'Slug coil' })).toHaveCount(0);
	} finally {
		await hand.end();
	}
});

test('without lines the count stands as an old one, and is the true one again once they come, also after a reload', async ({
	shop,
	screenOf
}) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 5_000, lookEvery: 0 }, workshop);
	const page = await screenOf(server, workshop.maker);
	const bench = await new BenchPage(page).open(server, winder);
	const hand = new HandWinder(server, winder);
	const old = page.locator('main[data-old="true"]');
	try {
		await hand.link();
		await hand.turn(400);
		await expect(bench.count).toHaveText('400');
		await expect(bench.beside).toHaveText('4,600 left');
		await expect(old).toHaveCount(0);

		await hand.unlink();
		await expect(bench.word).toHaveText('No signal');
		await expect(bench.beside).toHaveText(/^\d+:\d\d ago$/);
		await expect(old).toBeVisible();
		await hand.turn(250);
		await expect(bench.count).toHaveText('400');

		await page.reload();
		await expect(bench.word).toHaveText('No signal');
		await expect(bench.count).toHaveText('400');
		await expect(bench.beside).toHaveText(/^\d+:\d\d ago$/);

		await hand.link();
		await hand.turn(1);
		await expect(bench.count).toHaveText('651');
		await expect(bench.word).toHaveText('Winding');
		await expect(old).toHaveCount(0);
		await hand.stop();
		await expect(bench.word).toHaveText('Paused');
		await page.reload();
		await expect(bench.count).toHaveText('651');
		await expect(bench.word).toHaveText('Paused');
		await expect(old).toHaveCount(0);
	} finally {
		await hand.end();
	}
});
