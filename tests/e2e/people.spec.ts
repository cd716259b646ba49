import AxeBuilder from '@axe-core/playwright';
import type { Page } from '@playwright/test';
import { expect, signIn, test } from './fixtures.ts';

async function accessible(page: Page): Promise<void> {
	const { violations } = await new AxeBuilder({ page }).analyze();
	expect(violations.map(({ id, nodes }) => ({ id, where: nodes.map(({ target }) => target.join(' ')) }))).toEqual([]);
}

/** Nothing is wider than the narrowest phone (WCAG 2.2, 1.4.10: 320 CSS px), upright or lying. */
async function fits(page: Page): Promise<void> {
	for (const size of [
		{ width: 320, height: 640 },
		{ width: 320, height: 256 },
		{ width: 1280, height: 800 }
	]) {
		await page.setViewportSize(size);
		expect(await page.evaluate(() => document.documentElement.scrollWidth - window.innerWidth)).toBeLessThanOrEqual(0);
	}
}

test('an owner adds a person, who chooses a password and works in the role given', async ({
	page,
	server,
	browser
}) => {
	const said: string[] = [];
	page.on('console', (message) => said.push(message.text()));
	page.on('pageerror', (failure) => said.push(failure.message));
	const { owner } = server.workshop;
	await page.goto(`${server.url}/workshop/people`);
	await expect(page).toHaveURL(/\/sign-in\?to=/);
	await accessible(page);
	await page.getByLabel('E-mail address').fill(owner.email);
	await page.getByLabel('Password', { exact: true }).fill('this is not the one');
	await page.getByRole('button', { name: 'Sign in' }).click();
	await expect(page.getByRole('alert')).toContainText('do not belong together');
	await expect(page.getByLabel('E-mail address')).toHaveValue(owner.email);
	await page.getByLabel('Password', { exact: true }).fill(owner.password);
	await page.getByRole('button', { name: 'Sign in' }).click();
	await expect(page).toHaveURL(`${server.url}/workshop/people`);

	await page.getByLabel('Name').fill('Dee Marsh');
	await page.getByLabel('E-mail address').fill(owner.email);
	await page.getByLabel('Role').selectOption('apprentice');
	await page.getByRole('button', { name: 'Add this person' }).click();
	await expect(page.getByText('in use already')).toBeVisible();
	await expect(page.getByLabel('Name')).toHaveValue('Dee Marsh');
	await expect(page.getByLabel('Role')).toHaveValue('apprentice');
	await page.getByLabel('E-mail address').fill('dee@hollow.example');
	await page.getByRole('button', { name: 'Add this person' }).click();
	const link = await page.getByLabel('First password link for Dee Marsh').inputValue();
	await accessible(page);
	await fits(page);

	const dees = await (await browser.newContext()).newPage();
	dees.on('console', (message) => said.push(message.text()));
	await dees.goto(link);
	await accessible(dees);
	await dees.getByLabel('Password', { exact: true }).fill('passwordpassword1');
	await dees.getByRole('button', { name: 'Set this password' }).click();
	await expect(dees.getByText('one of the commonest')).toBeVisible();
	await dees.getByLabel('Password', { exact: true }).fill('nine herons on a gate');
	await dees.getByRole('button', { name: 'Set this password' }).click();
	await expect(dees).toHaveURL(/\/sign-in\?chosen/);
	const dee = { name: 'Dee Marsh', email: 'dee@hollow.example', password: 'nine herons on a gate' };
	await signIn(dees, server, { ...dee, role: 'apprentice' });
	expect((await dees.goto(`${server.url}/workshop/people`))?.status()).toBe(403);
	await expect(dees.getByRole('heading', { name: 'Not for this role' })).toBeVisible();
	await dees.goto(link);
	await expect(dees.getByRole('heading', { name: 'This link no longer works' })).toBeVisible();

	// Back to the list: a role given and a removal act at the other person's next request.
	await page.getByRole('main').getByRole('link', { name: 'Dee Marsh' }).click();
	await page.getByLabel('What Dee Marsh may do').selectOption('maker');
	await page.getByRole('button', { name: 'Change the role' }).click();
	await expect(page.getByText('Dee Marsh is now a maker')).toBeVisible();
	await accessible(page);
	await fits(page);
	await dees.goto(`${server.url}/me`);
	await expect(dees.getByText('maker at Workshop hollow')).toBeVisible();
	await page.getByText('Remove Dee Marsh', { exact: true }).click();
	await page.getByRole('button', { name: 'Remove Dee Marsh from Workshop hollow' }).click();
	await expect(page).toHaveURL(`${server.url}/workshop/people`);
	await expect(page.getByRole('main').getByRole('link', { name: 'Dee Marsh' })).toHaveCount(0);
	await dees.goto(`${server.url}/me`);
	await expect(dees).toHaveURL(/\/sign-in/);
	// Neither a script that failed nor anything the Content-Security-Policy held back; the 403 is meant.
	expect(said.filter((text) => !text.includes('status of 403'))).toEqual([]);
});

test('a new password signs out every other screen and keeps this one', async ({ page, server, browser }) => {
	const { maker } = server.workshop;
	await signIn(page, server, maker);
	const tablet = await (await browser.newContext()).newPage();
	await signIn(tablet, server, maker);
	await page.goto(`${server.url}/me`);
	await accessible(page);
	await fits(page);
	await page.getByLabel('Current password').fill(maker.password);
	await page.getByLabel('New password').fill('nine herons on a gate');
	await page.getByRole('button', { name: 'Change my password' }).click();
	await expect(page.getByText('Your password is changed')).toBeVisible();
	await page.reload();
	await expect(page.getByRole('heading', { name: maker.name })).toBeVisible();
	await tablet.goto(`${server.url}/me`);
	await expect(tablet).toHaveURL(/\/sign-in/);

	await signIn(tablet, server, { ...maker, password: 'nine herons on a gate' });
	await page.getByRole('button', { name: 'Sign out everywhere' }).click();
	await expect(page).toHaveURL(`${server.url}/sign-in`);
	await tablet.goto(`${server.url}/me`);
	await expect(tablet).toHaveURL(/\/sign-in/);
});

test('a session ends in this browser with sign out', async ({ page, server }) => {
	await signIn(page, server, server.workshop.apprentice);
	await page.goto(`${server.url}/me`);
	await page.getByRole('button', { name: 'Sign out', exact: true }).click();
	await expect(page).toHaveURL(`${server.url}/sign-in`);
	expect(await page.context().cookies()).toEqual([]);
});

test('another name of the same machine works for forms, and a page of another address does not', async ({
	page,
	server
}) => {
	const { owner } = server.workshop;
	const elsewhere = { ...server, url: `http://localhost:${server.port}` };
	await signIn(page, elsewhere, owner);
	await page.goto(`${elsewhere.url}/me`);
	await page.getByLabel('How your name stands').fill('Ada Quill-Moss');
	await page.getByRole('button', { name: 'Change my name' }).click();
	await expect(page.getByText('Your name is changed')).toBeVisible();

	const cookie = (await page.context().cookies()).map(({ name, value }) => `${name}=${value}`).join('; ');
	const post = (headers: Record<string, string>) =>
		fetch(`${server.url}/me?/name`, { method: 'POST', headers, body: new URLSearchParams({ name: 'Changed' }) });
	expect((await post({ cookie, origin: `http://127.0.0.1:${server.port + 1}` })).status).toBe(403);
	expect((await post({ cookie, origin: 'https://else.where', 'sec-fetch-site': 'cross-site' })).status).toBe(403);
	expect((await post({ cookie })).status).toBe(403);
	await page.reload();
	await expect(page.getByLabel('How your name stands')).toHaveValue('Ada Quill-Moss');
});

test('guessing is slowed down, the wait is said, and an unknown address answers like a wrong password', async ({
	server
}) => {
	const attempt = async (email: string, password: string) => {
		const answer = await fetch(`${server.url}/sign-in`, {
			method: 'POST',
			headers: { origin: server.url, accept: 'text/html' },
			body: new URLSearchParams({ email, password }),
			redirect: 'manual'
		});
		const text = (await answer.text()).replaceAll(email, '').replace(/nonce[-=]"?[^"' ]+/g, '');
		return {
			status: answer.status,
			retryAfter: answer.headers.get('retry-after'),
			said: /role="alert".*?<\/div>/s.exec(text)?.[0]
		};
	};
	const { owner, maker } = server.workshop;
	const wrong = await attempt(maker.email, 'wrong wrong wrong wrong');
	expect(await attempt('nobody@hollow.example', 'wrong wrong wrong wrong')).toEqual(wrong);
	expect(wrong.said).toContain('do not belong together');
	for (let i = 1; i < 10; i++) expect((await attempt(maker.email, 'wrong wrong wrong wrong')).status).toBe(400);
	const limited = await attempt(maker.email, maker.password);
	expect(limited.status).toBe(429);
	expect(Number(limited.retryAfter)).toBeGreaterThan(0);
	expect(limited.said).toMatch(/Wait \d+ minutes/);
	expect((await attempt(owner.email, owner.password)).status).toBe(303);
});

test('pages need no script to sign in and to change a name', async ({ browser, server }) => {
	const context = await browser.newContext({ javaScriptEnabled: false });
	const page = await context.newPage();
	await signIn(page, server, server.workshop.owner);
	await page.goto(`${server.url}/me`);
	await page.getByLabel('How your name stands').fill('');
	await page.getByLabel('How your name stands').fill('Ada Moss');
	await page.getByRole('button', { name: 'Change my name' }).click();
	await expect(page.getByText('Your name is changed')).toBeVisible();
	await context.close();
});
