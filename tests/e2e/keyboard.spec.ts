import type { Locator, Page } from '@playwright/test';
import { BenchPage } from './bench-page.ts';
import { HandWinder, handSettings } from './hand-winder.ts';
import { expect, test } from './fixtures.ts';

/** More stops than any page has before what is looked for. */
const stopsMax = 80;

/** Tab until that control has the focus; on the way every focus must be seen. */
async function tabTo(page: Page, wanted: Locator): Promise<void> {
	await expect(wanted).toBeVisible();
	for (let stop = 0; stop < stopsMax; stop++) {
		await page.keyboard.press('Tab');
		const where = await page.evaluate(() => {
			const element = document.activeElement;
			// The button within a date field is drawn by the browser, with a ring of its own.
			if (!element || element === document.body || !element.matches(':focus')) return null;
			const { outlineStyle, outlineWidth } = getComputedStyle(element);
			const box = element.getBoundingClientRect();
			return {
				what: element.outerHTML.slice(0, 120),
				ring: outlineStyle !== 'none' && parseFloat(outlineWidth) >= 2,
				inView: box.bottom > 0 && box.right > 0 && box.top < innerHeight && box.left < innerWidth && box.width > 0
			};
		});
		if (where) expect(where).toEqual({ ...where, ring: true, inView: true });
		if (await wanted.evaluate((element) => element === document.activeElement)) return;
	}
	throw new Error(`no ${stopsMax} presses of Tab reach ${String(wanted)}`);
}

test('from signing in to a kept coil in the book with keys alone', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	const page = await screenOf(server, null, { sound: 'ask' });
	const keys = page.keyboard;
	const bench = new BenchPage(page);
	const hand = new HandWinder(server, winder);
	try {
		await page.goto(`${server.url}/`);
		await tabTo(page, page.getByLabel('E-mail address'));
		await keys.type(workshop.maker.email);
		await tabTo(page, page.getByLabel('Password', { exact: true }));
		await keys.type(workshop.maker.password);
		await keys.press('Enter');

		for (const [name, target] of [
			['Screw coil', '1200'],
			['Slug coil', '900']
		] as const) {
			await tabTo(page, page.getByLabel('Name', { exact: true }));
			await keys.type(name);
			await tabTo(page, page.getByLabel('Target'));
			await keys.type(target);
			await tabTo(page, page.getByLabel('Seen from the top of the bobbin, the wire goes on'));
			await keys.press('ArrowDown');
			await tabTo(page, page.getByLabel('On the winder, top faces'));
			await keys.press('ArrowDown');
			await tabTo(page, page.getByRole('button', { name: 'Put in the queue' }));
			await keys.press('Enter');
			await expect(page.getByRole('status').filter({ hasText: 'The coil was put in the queue.' })).toBeAttached();
		}
		for (const name of ['Third coil', 'Fourth coil']) {
			await tabTo(page, page.getByLabel('Name', { exact: true }));
			await keys.type(name);
			await tabTo(page, page.getByLabel('Target'));
			await keys.type('700');
			await keys.press('Enter');
			await expect(page.getByText(name, { exact: true }).first()).toBeVisible();
		}
		await tabTo(page, page.getByRole('button', { name: 'Move up Fourth coil' }));
		await keys.press('Enter');
		const last = page.getByRole('row').filter({ hasText: /(Third|Fourth) coil/ });
		await expect(last).toContainText(['Fourth coil', 'Third coil']);
		await expect(page.getByRole('button', { name: 'Move up Fourth coil' })).toBeFocused();

		await tabTo(page, page.getByRole('link', { name: 'Open the bench of w-01' }));
		await keys.press('Enter');
		await hand.link();
		await expect(bench.tap('Start this coil')).toBeVisible();
		await keys.press('Space');
		await tabTo(page, bench.tap('Yes, I heard it'));
		await keys.press('Enter');
		await hand.turn(98);
		await hand.stop();
		await tabTo(page, bench.tap('guided again'));
		await keys.press('Space');
		await expect(bench.word).toHaveText('Paused');
		await hand.turn(405);
		await hand.stop();
		await expect(bench.word).toHaveText('Look');
		await page.evaluate(() => (document.activeElement as HTMLElement | null)?.blur());
		await keys.press('Enter');
		await expect(bench.word).toHaveText('Paused');
		await hand.turn(1_200 - 98 - 405);
		await hand.stop();
		await expect(bench.word).toHaveText('On the mark');
		await keys.press('Space');
		await expect(bench.word).toHaveText('Kept');
		await tabTo(page, bench.tap('To the queue'));
		await keys.press('Enter');

		await tabTo(page, page.getByRole('link', { name: 'Look up' }));
		await keys.press('Enter');
		await tabTo(page, page.getByRole('link', { name: 'Screw coil' }));
		await keys.press('Enter');
		await expect(page.getByRole('heading', { name: 'Screw coil', level: 1 })).toBeVisible();
		await expect(page.getByText('clockwise ↻').first()).toBeVisible();
		await tabTo(page, page.getByLabel('What to remember of this run'));
		await keys.type('Guided again at the first look.');
		await tabTo(page, page.getByRole('button', { name: 'Save the note' }));
		await keys.press('Enter');
		await expect(page.getByText('The note is saved.')).toBeVisible();
	} finally {
		await hand.end();
	}
});
