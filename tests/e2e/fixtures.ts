import {
	test as base,
	type BrowserContext,
	type BrowserContextOptions,
	type Page,
	type Request
} from '@playwright/test';
import { startServer, type Person, type TestServer, type Workshop } from './server.ts';

/** A workshop of its own on a server that other tests use as well: most tests need no more. */
export interface Shop {
	server: TestServer;
	workshop: Workshop;
}

/** What went wrong in any page of a test: script errors, refusals of the content policy, requests that failed. */
export class Troubles {
	readonly #seen: string[] = [];
	readonly #expected: RegExp[] = [];

	watch(context: BrowserContext): void {
		context.on('console', (message) => {
			if (message.type() !== 'error' && message.type() !== 'warning') return;
			// Told below, with the request it belongs to.
			if (message.text().startsWith('Failed to load resource: the server responded')) return;
			this.#seen.push(`${message.type()} in ${message.page()?.url()}: ${message.text()} (${message.location().url})`);
		});
		context.on('weberror', (error) => this.#seen.push(`uncaught: ${error.error().stack ?? error.error().message}`));
		context.on('requestfailed', (request) => {
			const why = request.failure()?.errorText ?? '';
			// A page that is left takes its streams and requests with it.
			if (why !== 'net::ERR_ABORTED') this.#seen.push(`failed: ${request.method()} ${request.url()} ${why}`);
		});
		context.on('response', (response) => {
			const request = response.request();
			if (response.status() < 400 || (response.status() < 500 && isAnswerToPerson(request))) return;
			this.#seen.push(`answer ${response.status()}: ${request.method()} ${request.url()}`);
		});
	}

	/** Trouble of this kind is what the test is about. */
	expect(...patterns: RegExp[]): void {
		this.#expected.push(...patterns);
	}

	/** The server goes away and comes back in this test. */
	expectNoServer(): void {
		this.expect(/ERR_(CONNECTION_|EMPTY_RESPONSE|INCOMPLETE_CHUNKED|SOCKET|NETWORK)/);
	}

	get unexpected(): string[] {
		return this.#seen.filter((text) => !this.#expected.some((pattern) => pattern.test(text)));
	}
}

/** A page that says why, or a form that is refused with a sentence: the test sees it on the screen. */
function isAnswerToPerson(request: Request): boolean {
	return request.isNavigationRequest() || request.headers()['x-sveltekit-action'] === 'true';
}

export interface ScreenOptions extends BrowserContextOptions {
	/** Without, the bench asks at the first tap whether its sound is heard, as it does in life. */
	sound?: 'ask';
}

interface Fixtures {
	/** The built program on a fresh database, for this test alone: it may be killed. */
	server: TestServer;
	shop: Shop;
	troubles: Troubles;
	/** A browser of its own in which that person is signed in; null: nobody is. */
	screenOf(server: TestServer, person: Person | null, options?: ScreenOptions): Promise<Page>;
}

interface WorkerFixtures {
	house: TestServer;
}

let shops = 0;

export const test = base.extend<Fixtures, WorkerFixtures>({
	// eslint-disable-next-line no-empty-pattern -- the test runner reads the names of a fixture's needs from this pattern
	server: async ({}, use) => {
		const server = await startServer();
		await use(server);
		await server.remove();
	},

	house: [
		// eslint-disable-next-line no-empty-pattern -- as above
		async ({}, use) => {
			const server = await startServer();
			await use(server);
			await server.remove();
		},
		{ scope: 'worker' }
	],

	shop: async ({ house }, use) => {
		await use({ server: house, workshop: await house.addWorkshop(`lane-${++shops}`) });
	},

	troubles: [
		// eslint-disable-next-line no-empty-pattern -- as above
		async ({}, use) => {
			const troubles = new Troubles();
			await use(troubles);
			base.expect(troubles.unexpected).toEqual([]);
		},
		{ auto: true }
	],

	context: async ({ context, troubles }, use) => {
		troubles.watch(context);
		await use(context);
	},

	screenOf: async ({ browser, troubles }, use) => {
		const contexts: BrowserContext[] = [];
		await use(async (server, person, { sound, ...options } = {}) => {
			const context = await browser.newContext({ viewport: { width: 1180, height: 820 }, ...options });
			contexts.push(context);
			troubles.watch(context);
			if (sound !== 'ask') {
				await context.addInitScript(() => {
					try {
						sessionStorage.setItem('turnstead.sound', 'screen-only');
					} catch {
						// A page without storage, such as about:blank.
					}
				});
			}
			if (person) await letIn(context, server, person);
			return context.newPage();
		});
		for (const context of contexts) await context.close();
	}
});

export { expect } from '@playwright/test';

/** Signs in through the page, as a person does. */
export async function signIn(page: Page, server: Pick<TestServer, 'url'>, person: Person): Promise<void> {
	await page.goto(`${server.url}/sign-in`);
	await page.getByLabel('E-mail address').fill(person.email);
	await page.getByLabel('Password', { exact: true }).fill(person.password);
	await page.getByRole('button', { name: 'Sign in' }).click();
	await page.waitForURL((url) => url.pathname !== '/sign-in');
}

/** Signs in by the form's own request, where the page is not what is looked at. */
async function letIn(context: BrowserContext, server: TestServer, person: Person): Promise<void> {
	const answer = await context.request.post(`${server.url}/sign-in`, {
		form: { email: person.email, password: person.password },
		headers: { origin: server.url, accept: 'text/html' },
		maxRedirects: 0
	});
	if (answer.status() !== 303) throw new Error(`${person.email} was not signed in: ${answer.status()}`);
}
