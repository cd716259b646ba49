import { networkInterfaces } from 'node:os';
import { expect, signIn, test } from './fixtures.ts';
import { startServer, type TestServer } from './server.ts';

let server: TestServer;

test.beforeAll(async () => {
	server = await startServer({ host: '0.0.0.0' });
});
test.afterAll(() => server.remove());

/** Names under which this machine reaches itself as its neighbours would; a machine without a network has only one. */
function otherNames(): string[] {
	const addresses = Object.values(networkInterfaces())
		.flat()
		.flatMap((entry) => (entry && entry.family === 'IPv4' && !entry.internal ? [entry.address] : []));
	return ['localhost', ...addresses.slice(0, 1)];
}

for (const [at, host] of otherNames().entries()) {
	test(`a tablet signs in and queues a coil under name ${at + 1} of the machine`, async ({ screenOf }) => {
		const page = await screenOf(server, null);
		const url = `http://${host}:${server.port}`;
		await signIn(page, { url }, server.workshop.maker);
		await expect(page).toHaveURL(`${url}/wind`);
		await page.getByLabel('Name', { exact: true }).fill(`Coil from name ${at + 1}`);
		await page.getByLabel('Target').fill('5,300');
		await page.getByRole('button', { name: 'Put in the queue' }).click();
		const row = page.getByRole('row').filter({ hasText: `Coil from name ${at + 1}` });
		await expect(row).toContainText('5,300');
	});
}

test('a form of another site that is sent with the maker’s cookie changes nothing and is refused in words', async ({
	screenOf
}) => {
	const page = await screenOf(server, server.workshop.maker);
	const form = `<form method="post" action="${server.url}/wind?/add">
		<input name="name" value="Not mine"><input name="target" value="500"><input name="lookEvery" value="0">
		<input name="direction" value="clockwise"><input name="topFaces" value="out"><input name="note" value="">
		<button>Win a prize</button></form>`;
	await page.route('http://elsewhere.example/', (route) => route.fulfill({ contentType: 'text/html', body: form }));
	await page.route('http://elsewhere.example/favicon.ico', (route) => route.fulfill({ status: 204 }));

	// The same name on another port is the same site, so the cookie goes along; another site's form goes without it.
	await page.goto('http://elsewhere.example/');
	const crossSite = page.waitForResponse((response) => response.request().method() === 'POST');
	await page.getByRole('button', { name: 'Win a prize' }).click();
	expect((await crossSite).status()).toBe(403);
	await expect(page.getByText('from a page of another address')).toBeVisible();

	await page.route('http://127.0.0.1:9/', (route) => route.fulfill({ contentType: 'text/html', body: form }));
	await page.route('http://127.0.0.1:9/favicon.ico', (route) => route.fulfill({ status: 204 }));
	await page.goto('http://127.0.0.1:9/');
	const sameSite = page.waitForResponse((response) => response.request().method() === 'POST');
	await page.getByRole('button', { name: 'Win a prize' }).click();
	expect((await sameSite).status()).toBe(403);
	expect((await sameSite).request().headers()['cookie'] ?? '').not.toBe('');

	await page.goto(`${server.url}/wind`);
	await expect(page.getByRole('heading', { name: 'Wind', level: 1 })).toBeVisible();
	await expect(page.getByText('Not mine')).toHaveCount(0);
});
