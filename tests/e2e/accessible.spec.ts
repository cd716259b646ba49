import type { Page } from '@playwright/test';
import { accessible } from './accessible.ts';
import { BenchPage } from './bench-page.ts';
import { HandWinder, handSettings } from './hand-winder.ts';
import { expect, test, type Shop } from './fixtures.ts';

async function addRun({ server, workshop }: Shop, hand: HandWinder, screen: Page): Promise<string> {
	const bench = await new BenchPage(screen).open(server, hand.winder);
	await hand.link();
	await hand.turn(498);
	await hand.stop();
	await bench.tap('Looks even').click();
	await expect(bench.word).toHaveText('Paused');
	await hand.turn(402);
	await hand.stop();
	await bench.keep.click();
	await expect(bench.word).toHaveText('Kept');
	const kept = () =>
		server.database.owner
			.selectFrom('run')
			.select('id')
			.where('workshop_id', '=', workshop.id)
			.where('state', '=', 'kept')
			.execute();
	await expect.poll(kept).toHaveLength(1);
	return (await kept())[0]!.id;
}

test('signing in and a first password are accessible, refused and done', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const page = await screenOf(server, null);
	await page.goto(`${server.url}/sign-in`);
	await accessible(page, 'sign in');
	await page.getByLabel('E-mail address').fill(workshop.owner.email);
	await page.getByLabel('Password', { exact: true }).fill('this is not the one');
	await page.getByRole('button', { name: 'Sign in' }).click();
	await expect(page.getByRole('alert')).toBeVisible();
	await accessible(page, 'sign in, refused');

	const owners = await screenOf(server, workshop.owner);
	await owners.goto(`${server.url}/workshop/people`);
	await owners.getByLabel('Name').fill('Dee Marsh');
	await owners.getByLabel('E-mail address').fill(`dee@${workshop.shortName}.example`);
	await owners.getByRole('button', { name: 'Add this person' }).click();
	const link = await owners.getByLabel('First password link for Dee Marsh').inputValue();
	await accessible(owners, 'people, with a new link');
	await page.goto(link);
	await accessible(page, 'first password');
	await page.getByLabel('Password', { exact: true }).fill('short');
	await page.getByRole('button', { name: 'Set this password' }).click();
	await expect(page.locator('[aria-invalid="true"]')).toBeVisible();
	await accessible(page, 'first password, refused');
	await page.goto(`${server.url}/first-password/not-a-link`);
	await accessible(page, 'a link that no longer works');
});

test('the pages of the workshop are accessible while there is nothing in them', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const page = await screenOf(server, workshop.owner);
	for (const path of [
		'/specs',
		'/specs/new',
		'/wind',
		'/book',
		'/spools',
		'/workshop/meters',
		'/workshop/winders',
		'/workshop/people',
		'/me',
		'/not-a-page',
		'/book/none',
		'/specs/none'
	]) {
		await page.goto(server.url + path);
		await expect(page.getByRole('heading', { level: 1 })).toBeVisible();
		await accessible(page, `${path}, empty`);
	}
	await page.goto(`${server.url}/wind`);
	await page.getByLabel('Name', { exact: true }).fill('Bridge');
	await page.getByLabel('Target').fill('lots');
	await page.getByRole('button', { name: 'Put in the queue' }).click();
	await expect(page.locator('[aria-invalid="true"]')).toBeVisible();
	await accessible(page, 'the form refused');
});

test('the pages of the workshop are accessible with winders, coils and runs in them', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	for (const name of ['Bridge', 'Neck', 'Middle', 'Trial']) {
		await server.addCoil({ name, target: 900, note: 'Thin wire: slowly.' }, workshop);
	}
	const page = await screenOf(server, workshop.owner);
	const hand = new HandWinder(server, winder);
	try {
		const runId = await addRun(shop, hand, page);
		await page.goto(`${server.url}/wind`);
		await expect(page.getByRole('table')).toHaveCount(2);
		await accessible(page, 'wind, filled');
		await page.getByRole('link', { name: 'Change Middle' }).click();
		await expect(page.getByRole('heading', { name: 'Change Middle' })).toBeVisible();
		await accessible(page, 'wind, a coil being changed');
		await page.goto(`${server.url}/book`);
		await expect(page.getByRole('row')).toHaveCount(2);
		await accessible(page, 'book, filled');
		await page.goto(`${server.url}/book?find=nothing+fits+this`);
		await accessible(page, 'book, nothing found');
		await page.goto(`${server.url}/book/${runId}`);
		await expect(page.getByRole('img', { name: /^Turns and speed/ })).toBeVisible();
		await page.getByText('The same numbers as a table').click();
		await accessible(page, 'a run');
		await page.goto(`${server.url}/workshop/winders`);
		await accessible(page, 'winders, filled');
		await page.goto(`${server.url}/workshop/winders/${winder.id}`);
		await expect(page.getByRole('table')).toBeVisible();
		await accessible(page, 'a winder');
		page.once('dialog', (dialog) => void dialog.accept());
		await page.getByRole('button', { name: 'Make a new link key' }).click();
		await expect(page.getByLabel(`Link key of ${winder.name}`)).toBeVisible();
		await accessible(page, 'a winder, with a new key');
		await page.goto(`${server.url}/workshop/people`);
		await page.getByRole('main').getByRole('link', { name: workshop.maker.name }).click();
		await expect(page.getByRole('heading', { name: workshop.maker.name, level: 1 })).toBeVisible();
		await page.getByText(`Remove ${workshop.maker.name}`, { exact: true }).click();
		await accessible(page, 'a person');
	} finally {
		await hand.end();
	}
});

test('the bench is accessible in each of its states', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	const page = await screenOf(server, workshop.maker);
	const hand = new HandWinder(server, winder);
	try {
		const bench = await new BenchPage(page).open(server, winder);
		await expect(bench.says('Nothing waiting to be wound')).toBeVisible();
		await accessible(page, 'no coil');
		const queue = await screenOf(server, workshop.maker);
		await queue.goto(`${server.url}/wind`);
		for (const name of ['Bridge', 'Neck']) {
			await queue.getByLabel('Name', { exact: true }).fill(name);
			await queue.getByLabel('Target').fill('900');
			await queue.getByRole('button', { name: 'Put in the queue' }).click();
			await expect(queue.getByText(name, { exact: true }).first()).toBeVisible();
		}
		await queue.close();
		await expect(bench.tap('Start this coil')).toBeVisible();
		await accessible(page, 'waiting');
		await bench.tap('Screen, sound').click();
		await expect(page.getByRole('dialog')).toBeVisible();
		await page.getByRole('button', { name: 'Measure this screen with a card' }).click();
		await accessible(page, 'the sheet of screen and sound');
		await page.getByRole('button', { name: 'Back to the count' }).click();

		await hand.link();
		await hand.turn(60);
		await expect(bench.word).toHaveText('Winding');
		await accessible(page, 'winding');
		await hand.turn(38);
		await hand.stop();
		await expect(bench.tap('Looks even')).toBeVisible();
		await accessible(page, 'at a look');
		await bench.tap('Looks even').click();
		await expect(bench.word).toHaveText('Paused');
		await accessible(page, 'paused');
		await bench.press('Set aside', bench.tap('Go back'));
		await accessible(page, 'asked why it is set aside');
		await bench.press('Go back', bench.tap('taking off'));
		await bench.press('wire snapped', bench.tap('It left here'));
		await accessible(page, 'asked where the wire left');
		await bench.press('The wire held', bench.tap('taking off'));
		await hand.turn(300);
		await hand.unlink();
		await expect(bench.word).toHaveText('No signal');
		await accessible(page, 'no signal');
		await hand.link();
		await hand.turn(470);
		await expect(bench.word).toHaveText('Ease off');
		await accessible(page, 'easing');
		await hand.turn(30);
		await expect(bench.word).toHaveText('Stop');
		await accessible(page, 'stop');
		await hand.turn(2);
		await hand.stop();
		await expect(bench.word).toHaveText('On the mark');
		await accessible(page, 'on count');
		await bench.keep.click();
		await expect(bench.word).toHaveText('Kept');
		await accessible(page, 'kept');
	} finally {
		await hand.end();
	}
});

test('who is signed out at the bench is told so in its own word, accessibly', async ({ shop, screenOf, troubles }) => {
	troubles.expect(/answer 401: POST \S+\/taps/);
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 300, lookEvery: 0 }, workshop);
	const page = await screenOf(server, workshop.maker);
	const hand = new HandWinder(server, winder);
	try {
		await hand.link();
		const bench = await new BenchPage(page).open(server, winder);
		await expect(bench.tap('Start this coil')).toBeVisible();
		await hand.wind(300);
		await expect(bench.keep).toBeVisible();
		await page.context().clearCookies();
		await bench.keep.click();
		await expect(bench.word).toHaveText('Signed out');
		await expect(bench.tap('Sign in again')).toBeVisible();
		await expect(page.locator('main[data-ground="plain"][data-old="true"]')).toBeVisible();
		await expect(bench.count).toHaveText('300');
		await accessible(page, 'signed out');
	} finally {
		await hand.end();
	}
});

test('what is read out on coming to the bench is its name, whatever the count does since', async ({
	shop,
	screenOf
}) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 900, lookEvery: 0 }, workshop);
	const page = await screenOf(server, workshop.maker);
	const hand = new HandWinder(server, winder);
	const title = `Bench of ${winder.name} · Turnstead`;
	try {
		await hand.link();
		await hand.turn(300);
		await page.goto(`${server.url}/wind`);
		await page.getByRole('link', { name: `Open the bench of ${winder.name}` }).click();
		const bench = new BenchPage(page);
		await expect(bench.count).toHaveText('300');
		await expect(page.locator('#svelte-announcer')).toHaveText(title);
		await hand.turn(100);
		await expect(bench.count).toHaveText('400');
		await expect(bench.says(`${winder.name} live`)).toBeVisible();
		await expect(page).toHaveTitle(title);
		await expect(page.locator('#svelte-announcer')).toHaveText(title);
	} finally {
		await hand.end();
	}
});
