import type { Locator, Page } from '@playwright/test';
import { genericBobbins } from '../../src/lib/coil/bobbins.ts';
import { wholeText } from '../../src/lib/format.ts';
import { startingSpec } from '../../src/lib/spec/start.ts';
import { predictCoil } from '../../src/lib/spec/model.ts';
import { BenchPage } from './bench-page.ts';
import { accessible } from './accessible.ts';
import { expect, test, type Shop } from './fixtures.ts';
import { HandWinder, handSettings } from './hand-winder.ts';

/** A figure of the table by its label: its value and its ±. */
function figureRow(page: Page, label: string | RegExp): Locator {
	return page
		.getByRole('table', { name: 'What this spec will measure' })
		.getByRole('row')
		.filter({ has: page.getByRole('rowheader', { name: label }) });
}
const turnsField = (page: Page, coil: string) => page.getByRole('textbox', { name: coil, exact: true });
const edgeOf = (page: Page, coil: string) => page.getByRole('slider', { name: `Turns of ${coil}: the copper’s edge` });

/** kΩ of the figure called so. */
async function kilohms(page: Page, label = 'Resistance at 20 °C'): Promise<number> {
	const text = await figureRow(page, label).textContent();
	return Number(/([\d.]+) kΩ/.exec(text ?? '')?.[1]);
}

async function newSpec(page: Page, shop: Shop, name: string, kind = 'Two coils'): Promise<void> {
	await page.goto(`${shop.server.url}/specs/new`);
	await page.getByRole('link', { name: new RegExp(`^${kind}`) }).click();
	await page.getByRole('textbox', { name: 'Name', exact: true }).fill(name);
	await page.getByRole('button', { name: 'Save this spec' }).first().click();
	await expect(page.getByRole('heading', { name: `${name}, revision 1`, level: 1 })).toBeVisible();
}

test('a new maker makes a spec, moves its turns by field, slider, drag and keys, and reads the figures', async ({
	shop,
	screenOf
}) => {
	const page = await screenOf(shop.server, shop.workshop.maker, { viewport: { width: 1280, height: 800 } });
	await page.goto(`${shop.server.url}/wind`);
	await page.getByRole('link', { name: 'Decide' }).click();
	await expect(page.getByText('No spec yet')).toBeVisible();
	await accessible(page, 'no spec');
	await page.getByRole('link', { name: 'Make the first spec' }).click();
	await accessible(page, 'what to start from');
	await page.getByRole('link', { name: 'Two coils' }).click();
	await expect(figureRow(page, 'Resistance at 20 °C')).toContainText(/[\d.]+ kΩ/);
	await accessible(page, 'a new spec');

	// Refused without a name, with everything that was typed.
	await turnsField(page, 'Screw coil').fill('4950');
	await page.getByRole('button', { name: 'Save this spec' }).first().click();
	await expect(page.getByRole('textbox', { name: 'Name', exact: true })).toHaveAttribute('aria-invalid', 'true');
	await expect(turnsField(page, 'Screw coil')).toHaveValue('4950');
	await accessible(page, 'a new spec, refused');
	await page.getByRole('textbox', { name: 'Name', exact: true }).fill('Evening bridge');
	await turnsField(page, 'Slug coil').fill('4 850');
	// Facts of common practice, no source: 4,950 and 4,850 turns of AWG 42 measure 7.33 kΩ in series.
	await expect.poll(() => kilohms(page)).toBeCloseTo(7.3, 1);
	await page.getByRole('button', { name: 'Save this spec' }).first().click();
	await expect(page.getByRole('heading', { name: 'Evening bridge, revision 1', level: 1 })).toBeVisible();
	await expect(turnsField(page, 'Slug coil')).toHaveValue('4,850');

	// Dragging the copper's edge outwards winds turns on, in the field and in the figures.
	const before = await kilohms(page);
	const edge = edgeOf(page, 'Screw coil');
	await edge.scrollIntoViewIfNeeded();
	const box = (await edge.boundingBox())!;
	await page.mouse.move(box.x + box.width / 2, box.y + box.height / 2);
	await page.mouse.down();
	await page.mouse.move(box.x + box.width / 2 + 4, box.y + box.height / 2, { steps: 4 });
	await page.mouse.up();
	const dragged = Number((await turnsField(page, 'Screw coil').inputValue()).replace(',', ''));
	expect(dragged).toBeGreaterThan(4950);
	await expect.poll(() => kilohms(page)).toBeGreaterThan(before);
	await expect(edge).toHaveAttribute('aria-valuenow', String(dragged));

	// The same by keys.
	await edge.focus();
	await page.keyboard.press('ArrowRight');
	await expect(turnsField(page, 'Screw coil')).toHaveValue(wholeText(dragged + 10));
	await page.keyboard.press('PageDown');
	await expect(turnsField(page, 'Screw coil')).toHaveValue(wholeText(dragged - 90));
	// A full bobbin and more says so in words.
	await page.keyboard.press('End');
	await expect(figureRow(page, /^Room to the flange/)).toContainText(/climb the flange|does not fit/);
	await accessible(page, 'a full bobbin');

	// Every figure explains itself and says what its ± comes from.
	const explained = figureRow(page, 'Resistance at 20 °C').getByRole('button');
	await explained.click();
	await expect(page.getByText('What a meter shows at the leads')).toBeVisible();
	await expect(page.getByText('± holds 19 times in 20').first()).toBeVisible();
	await expect(page.getByText('Ohms compare only on the same wire and bobbin').first()).toBeVisible();

	// Turns for a wanted resistance, used with one touch.
	await page.getByLabel('As the coils are wired').fill('7.5');
	await page.getByRole('button', { name: 'Use these turns' }).click();
	await expect.poll(() => kilohms(page)).toBeCloseTo(7.5, 1);

	// Not saved yet: leaving asks, and staying keeps it.
	let asked = '';
	page.once('dialog', (dialog) => {
		asked = dialog.message();
		void dialog.dismiss();
	});
	await page.getByRole('link', { name: 'Look up' }).click();
	await expect.poll(() => asked).toContain('not saved');
	await page.keyboard.press('Control+s');
	await expect(page.getByText('Revision 1 is saved').first()).toBeAttached();
});

test('a spec is wound, measured and judged, and its next revision compared with the first', async ({
	shop,
	screenOf
}) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	const page = await screenOf(server, workshop.owner, { viewport: { width: 1180, height: 820 } });

	// A meter and a spool, so that readings know what they are worth and coils can teach one another.
	await page.goto(`${server.url}/workshop/meters`);
	await page.getByRole('textbox', { name: 'Name' }).fill('Bench meter');
	await page.getByRole('button', { name: 'Add the meter' }).click();
	await expect(
		page
			.getByRole('cell', { name: 'Bench meter' })
			.or(page.getByRole('rowheader', { name: 'Bench meter' }))
			.first()
	).toBeVisible();
	await accessible(page, 'meters');
	await page.goto(`${server.url}/spools`);
	await page.getByRole('textbox', { name: 'Name', exact: true }).fill('Spool seven');
	await page.getByRole('button', { name: 'Put it on the shelf' }).click();
	await expect(page.getByText('Spool seven').first()).toBeVisible();
	await accessible(page, 'spools');

	await newSpec(page, shop, 'Evening bridge', 'One coil');
	await page.getByRole('textbox', { name: 'Turns', exact: true }).fill('6000');
	await page.getByLabel('Spool', { exact: true }).selectOption({ label: 'Spool seven' });
	await page.getByRole('button', { name: 'Save revision 1' }).first().click();
	await expect(page.getByText('Revision 1 is saved').first()).toBeAttached();
	await page.getByLabel('How many pickups').fill('2');
	await page.getByRole('button', { name: 'Put in the queue' }).click();
	await expect(page.getByRole('heading', { name: 'Wind', level: 1 })).toBeVisible();
	await expect(page.getByText('Evening bridge').first()).toBeVisible();

	// The copper stands as high as the real geometry says: 6,000 turns do not fill the bobbin.
	const hand = new HandWinder(server, winder);
	const runs: string[] = [];
	try {
		const bench = await new BenchPage(await screenOf(server, workshop.maker)).open(server, winder);
		await hand.link();
		for (const wound of [6000, 6000]) {
			await expect(bench.page.getByRole('heading', { name: /Evening bridge/ })).toBeVisible();
			await hand.wind(98);
			if (runs.length === 0) {
				await bench.tap('Looks even').click();
				await expect(bench.word).toHaveText('Paused');
			}
			await hand.wind(wound - 98);
			await expect(bench.count).toHaveText(wholeText(wound));
			await bench.keep.click();
			await expect(bench.word).toHaveText('Kept');
			const kept = () =>
				server.database.owner
					.selectFrom('run')
					.select('id')
					.where('workshop_id', '=', workshop.id)
					.where('state', '=', 'kept')
					.execute();
			await expect.poll(kept).toHaveLength(runs.length + 1);
			runs.push((await kept()).map(({ id }) => id).find((id) => !runs.includes(id))!);
		}
	} finally {
		await hand.end();
	}

	// What the model says of 6,000 turns on the generic bobbin, and a coil that measures 1.5 % more.
	const content = startingSpec('one-coil', 'Evening bridge');
	expect(content.bobbin.generic).toBe(genericBobbins[1]!.key);
	const predicted = predictCoil(content, 6000);
	if (!predicted.ok) throw new Error(predicted.field);
	const measuredKilohm = ((1.015 * predicted.value.figures.resistanceOhm.value) / 1000).toFixed(2);
	await page.goto(`${server.url}/book/${runs[0]}`);
	await expect(page.getByText('Expected at 20 °C')).toBeVisible();
	await expect(page.getByText('the figures are the model’s own')).toBeVisible();
	await page.getByLabel('Value').fill(measuredKilohm);
	await page.getByRole('button', { name: 'Keep this reading' }).click();
	const readings = page.getByRole('table', { name: /^Readings/ });
	await expect(readings).toContainText('Agrees.');
	await accessible(page, 'a run with a reading');

	// The next coil is expected where the first one was measured, and closer.
	await page.goto(`${server.url}/book/${runs[1]}`);
	await expect(page.getByText('Calibrated from one kept coil')).toBeVisible();
	await page.getByLabel('No reading: beyond every range (open)').check();
	await page.getByRole('button', { name: 'Keep this reading' }).click();
	await expect(readings).toContainText('Open.');
	await expect(readings).toContainText(/broken|lead/);
	page.once('dialog', (dialog) => void dialog.accept());
	await page
		.getByRole('button', { name: /^Strike/ })
		.first()
		.click();
	await expect(readings).toContainText('struck out');

	// In the bench book the measured value stands beside what was predicted.
	await page.goto(`${server.url}/book`);
	const row = page.getByRole('row').filter({ hasText: 'Agrees' });
	await expect(row).toHaveCount(1);
	await expect(row.getByRole('cell', { name: measuredKilohm, exact: true })).toBeVisible();
	await expect(row).toContainText(/\d\.\d\d ± 0\.\d/);
	await accessible(page, 'book with measured coils');

	// Frozen by its first use: what is changed becomes revision 2, and the two compare field by field.
	await page.goto(`${server.url}/specs`);
	await accessible(page, 'specs');
	await page.getByRole('link', { name: 'Evening bridge' }).click();
	await expect(page.getByRole('heading', { name: 'What your kept coils say' })).toBeVisible();
	await page.getByRole('textbox', { name: 'Turns', exact: true }).fill('6200');
	await page.getByLabel('What changed, and why').fill('Hotter for the quiet strings.');
	await page.getByRole('button', { name: 'Save as revision 2' }).first().click();
	await expect(page.getByRole('heading', { name: 'Evening bridge, revision 2', level: 1 })).toBeVisible();
	await page.getByRole('link', { name: 'Compare revisions' }).click();
	const changed = page.getByRole('table', { name: 'Changed fields, and what each change alone does' });
	await expect(changed.getByRole('row')).toHaveCount(2);
	await expect(changed).toContainText('6,000');
	await expect(changed).toContainText('6,200');
	await expect(changed).toContainText(/kΩ/);
	await accessible(page, 'two revisions');
	await page.goto(page.url().replace(/\/compare.*$/, '/revisions/1'));
	await expect(page.getByText('6,000').first()).toBeVisible();
	await accessible(page, 'an old revision');
	await expect(page.getByRole('button', { name: /^Save (as )?revision/ })).toHaveCount(0);
});

test('the response follows the player’s controls, and is there as a table and a sheet', async ({ shop, screenOf }) => {
	const page = await screenOf(shop.server, shop.workshop.maker, { viewport: { width: 1280, height: 800 } });
	await newSpec(page, shop, 'Morning neck');
	const table = page.getByRole('table', { name: 'Peaks, and levels at each E' });
	await expect(table).toContainText(/kHz/);
	const full = await table.textContent();
	await page.getByRole('slider', { name: 'Volume', exact: true }).press('Home');
	await expect.poll(() => table.textContent()).not.toBe(full);
	await page.getByRole('slider', { name: 'Volume', exact: true }).press('End');
	await expect.poll(() => table.textContent()).toBe(full);

	const sheet = page.waitForEvent('download');
	await page.getByRole('button', { name: 'Save as table' }).click();
	expect((await sheet).suggestedFilename()).toMatch(/\.csv$/);
	const picture = page.waitForEvent('download');
	await page.getByRole('button', { name: 'Save as picture' }).click();
	expect((await picture).suggestedFilename()).toMatch(/\.png$/);
});

test('a spec is made, saved and queued by keyboard alone, and prints what it says', async ({ shop, screenOf }) => {
	const page = await screenOf(shop.server, shop.workshop.maker);
	await page.goto(`${shop.server.url}/specs/new`);
	await press(page, page.getByRole('link', { name: 'Two coils' }));
	await expect(page.getByRole('textbox', { name: 'Name', exact: true })).toBeVisible();
	await reach(page, page.getByRole('textbox', { name: 'Name', exact: true }));
	await page.keyboard.type('Keyboard bridge');
	await page.keyboard.press('Control+s');
	await expect(page.getByRole('heading', { name: 'Keyboard bridge, revision 1', level: 1 })).toBeVisible();
	await press(page, page.getByRole('button', { name: 'Put in the queue' }));
	await expect(page.getByRole('heading', { name: 'Wind', level: 1 })).toBeVisible();
	await expect(page.getByRole('row').filter({ hasText: 'Keyboard bridge' })).toHaveCount(2);

	await page.goBack();
	await expect(page.getByRole('heading', { name: 'Keyboard bridge, revision 1', level: 1 })).toBeVisible();
	await page.emulateMedia({ media: 'print' });
	await expect(page.getByRole('button', { name: 'Put in the queue' })).toBeHidden();
	await expect(page.getByRole('navigation')).toBeHidden();
	await expect(page.getByText('counter-clockwise').first()).toBeVisible();
	await expect(figureRow(page, 'Resistance at 20 °C')).toBeVisible();
});

/** By Tab alone, as far as it takes. */
async function reach(page: Page, wanted: Locator): Promise<void> {
	for (let steps = 0; steps < 200; steps += 1) {
		if (await wanted.evaluate((element) => element === document.activeElement)) return;
		await page.keyboard.press('Tab');
	}
	throw new Error('Tab never reached it');
}

async function press(page: Page, wanted: Locator): Promise<void> {
	await reach(page, wanted);
	await page.keyboard.press('Enter');
}
