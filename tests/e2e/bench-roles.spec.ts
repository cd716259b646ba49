import { BenchPage } from './bench-page.ts';
import { HandWinder, handSettings } from './hand-winder.ts';
import { expect, test } from './fixtures.ts';

test('an apprentice winds and keeps, and neither queues nor changes people or winders', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 400, lookEvery: 0 }, workshop);
	const page = await screenOf(server, workshop.apprentice);
	const hand = new HandWinder(server, winder);
	try {
		const bench = await new BenchPage(page).open(server, winder);
		await hand.link();
		await hand.wind(400);
		await bench.keep.click();
		await expect(bench.word).toHaveText('Kept');

		await page.goto(`${server.url}/wind`);
		await expect(page.getByRole('heading', { name: 'Wind', level: 1 })).toBeVisible();
		await expect(page.getByRole('button', { name: 'Put in the queue' })).toHaveCount(0);
		await expect(page.getByRole('navigation').getByRole('link', { name: /Workshop/ })).toHaveCount(0);
		for (const path of ['/workshop/people', '/workshop/winders', `/workshop/winders/${winder.id}`]) {
			expect((await page.goto(server.url + path))?.status(), path).toBe(403);
			await expect(page.getByRole('heading', { name: 'Not for this role' })).toBeVisible();
		}
		const post = async (path: string, form: Record<string, string>) => {
			const headers = { origin: server.url, accept: 'text/html' };
			return (await page.request.post(server.url + path, { form, headers, maxRedirects: 0 })).status();
		};
		expect(await post('/wind?/add', { name: 'Own coil', target: '500', lookEvery: '0' })).toBe(403);
		expect(await post('/workshop/people?/add', { name: 'X', email: 'x@lane.example', role: 'owner' })).toBe(403);
		expect(await post(`/workshop/winders/${winder.id}?/revoke`, {})).toBe(403);

		await page.goto(`${server.url}/book`);
		await expect(page.getByRole('row').filter({ hasText: 'Bridge' })).toContainText(workshop.apprentice.name);
	} finally {
		await hand.end();
	}
});

test('a maker sees the winders and cannot change them', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder({}, workshop);
	const page = await screenOf(server, workshop.maker);
	await page.goto(`${server.url}/workshop/winders`);
	await expect(page.getByRole('link', { name: 'w-01', exact: true })).toBeVisible();
	await expect(page.getByRole('heading', { name: 'Add a winder' })).toHaveCount(0);
	await page.getByRole('link', { name: 'w-01', exact: true }).click();
	await expect(page.getByRole('heading', { name: 'w-01', level: 1 })).toBeVisible();
	await expect(page.getByRole('button', { name: /link key/ })).toHaveCount(0);
	const answer = await page.request.post(`${server.url}/workshop/winders/${winder.id}?/revoke`, {
		form: {},
		headers: { origin: server.url, accept: 'text/html' },
		maxRedirects: 0
	});
	expect(answer.status()).toBe(403);
});

test('who is removed is signed out of the bench and taps no more, and the winder goes on counting', async ({
	shop,
	screenOf,
	troubles
}) => {
	troubles.expect(/answer 401: GET \S+\/live/);
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 400, lookEvery: 0 }, workshop);
	const hand = new HandWinder(server, winder);
	try {
		const makers = await new BenchPage(await screenOf(server, workshop.maker)).open(server, winder);
		await hand.link();
		await hand.turn(300);
		await expect(makers.count).toHaveText('300');

		const owners = await screenOf(server, workshop.owner);
		await owners.goto(`${server.url}/workshop/people`);
		await owners.getByRole('main').getByRole('link', { name: workshop.maker.name }).click();
		await owners.getByText(`Remove ${workshop.maker.name}`, { exact: true }).click();
		await owners.getByRole('button', { name: `Remove ${workshop.maker.name} from` }).click();
		await expect(owners).toHaveURL(`${server.url}/workshop/people`);

		await hand.wind(100);
		await expect(makers.says('signed out: the winder goes on counting')).toBeVisible();
		await expect(makers.keep).toHaveCount(0);
		const tap = { id: crypto.randomUUID(), kind: 'keep', ageMs: 0 };
		const headers = { origin: server.url };
		const taps = `${server.url}/api/v1/winders/${winder.id}/taps`;
		expect((await makers.page.request.post(taps, { data: tap, headers })).status()).toBe(401);

		const bench = await new BenchPage(owners).open(server, winder);
		await expect(bench.word).toHaveText('On the mark');
		await expect(bench.count).toHaveText('400');
		await expect(bench.keep).toBeEnabled();
	} finally {
		await hand.end();
	}
});

test('a role changed by the owner counts from the next request on', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const makers = await screenOf(server, workshop.maker);
	await makers.goto(`${server.url}/wind`);
	await expect(makers.getByRole('button', { name: 'Put in the queue' })).toBeVisible();

	const owners = await screenOf(server, workshop.owner);
	await owners.goto(`${server.url}/workshop/people`);
	await owners.getByRole('main').getByRole('link', { name: workshop.maker.name }).click();
	await owners.getByLabel(`What ${workshop.maker.name} may do`).selectOption('apprentice');
	await owners.getByRole('button', { name: 'Change the role' }).click();
	await expect(owners.getByText(`${workshop.maker.name} is now an apprentice`)).toBeVisible();

	await makers.getByLabel('Name', { exact: true }).fill('Bridge');
	await makers.getByLabel('Target').fill('5300');
	await makers.getByRole('button', { name: 'Put in the queue' }).click();
	await expect(makers.getByRole('heading', { name: 'Not for this role' })).toBeVisible();
	await makers.goto(`${server.url}/wind`);
	await expect(makers.getByText('Bridge', { exact: true })).toHaveCount(0);
	await expect(makers.getByRole('button', { name: 'Put in the queue' })).toHaveCount(0);
});

test('another workshop’s bench, winder and run are not there', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 400, lookEvery: 0 }, workshop);
	const hand = new HandWinder(server, winder);
	try {
		const bench = await new BenchPage(await screenOf(server, workshop.maker)).open(server, winder);
		await hand.link();
		await hand.wind(400);
		await bench.keep.click();
		await expect(bench.word).toHaveText('Kept');
		const runs = () =>
			server.database.owner.selectFrom('run').select('id').where('workshop_id', '=', workshop.id).execute();
		await expect.poll(runs).toHaveLength(1);
		const runId = (await runs())[0]!.id;
		const other = await server.addWorkshop(`${workshop.shortName}-over`);
		const page = await screenOf(server, other.owner);
		for (const path of [`/bench/${winder.id}`, `/workshop/winders/${winder.id}`, `/book/${runId}`]) {
			expect((await page.goto(server.url + path))?.status(), path).toBe(404);
			await expect(page.getByRole('heading', { name: 'Nothing here' })).toBeVisible();
		}
		const live = await page.request.get(`${server.url}/api/v1/winders/${winder.id}/live`);
		expect(live.status()).toBe(404);
		expect(live.headers()['content-type']).toContain('application/problem+json');
	} finally {
		await hand.end();
	}
});
