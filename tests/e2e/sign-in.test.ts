import { networkInterfaces } from 'node:os';
import { expect, signIn, test } from './fixtures.ts';
import { startServer } from './server.ts';

test('a maker signs in and out, and the pages behind it are closed again', async ({ server, page }) => {
	await signIn(page, server, server.workshop.maker);
	await expect(page).toHaveURL(`${server.url}/wind`);
	await page.getByRole('link', { name: 'Tom Fenn' }).click();
	await page.getByRole('button', { name: 'Sign out', exact: true }).click();
	await expect(page).toHaveURL(/\/sign-in/);
	await page.goto(`${server.url}/wind`);
	await expect(page).toHaveURL(/\/sign-in/);
});

test('a wrong password signs nobody in', async ({ server, page }) => {
	await page.goto(`${server.url}/sign-in`);
	await page.getByLabel('E-mail address').fill(server.workshop.owner.email);
	await page.getByLabel('Password', { exact: true }).fill('four wrong words here');
	await page.getByRole('button', { name: 'Sign in' }).click();
	await expect(page.getByRole('alert')).toBeVisible();
	expect(new URL(page.url()).pathname).toBe('/sign-in');
	expect(await page.context().cookies()).not.toContainEqual(
		expect.objectContaining({ name: expect.stringMatching(/session/i) })
	);
});

test('forms work under every name and address of the machine, as from a tablet on the local network', async ({
	browser
}) => {
	const server = await startServer({ host: '0.0.0.0' });
	try {
		const address = Object.values(networkInterfaces())
			.flat()
			.find((entry) => entry && entry.family === 'IPv4' && !entry.internal)?.address;
		// A machine without any network still has several names for itself.
		for (const host of ['localhost', address ?? '127.0.0.1']) {
			const context = await browser.newContext();
			const page = await context.newPage();
			const url = `http://${host}:${server.port}`;
			await signIn(page, { url }, server.workshop.owner);
			await expect(page, host).toHaveURL(`${url}/wind`);
			await context.close();
		}
	} finally {
		await server.remove();
	}
});
