import { test as base, type Page } from '@playwright/test';
import { startServer, type Person, type TestServer } from './server.ts';

/** `server`: the built program on a fresh database, for this test alone. */
export const test = base.extend<{ server: TestServer }>({
	// eslint-disable-next-line no-empty-pattern -- the test runner reads the names of a fixture's needs from this pattern
	server: async ({}, use) => {
		const server = await startServer();
		await use(server);
		await server.remove();
	}
});

export { expect } from '@playwright/test';

/** Signs in through the page, as a person does. */
export async function signIn(page: Page, server: TestServer, person: Person): Promise<void> {
	await page.goto(`${server.url}/sign-in`);
	await page.getByLabel('E-mail address').fill(person.email);
	await page.getByLabel('Password', { exact: true }).fill(person.password);
	await page.getByRole('button', { name: 'Sign in' }).click();
	await page.waitForURL((url) => url.pathname !== '/sign-in');
}
