import type { Page } from '@playwright/test';
import type { FactKind } from '../../src/lib/winding/types.ts';
import { BenchPage } from './bench-page.ts';
import { HandWinder, handSettings } from './hand-winder.ts';
import { expect, test, type Shop } from './fixtures.ts';

async function factKinds({ server, workshop }: Shop, kinds: FactKind[]): Promise<string[]> {
	const facts = await server.database.owner
		.selectFrom('fact')
		.select('kind')
		.where('workshop_id', '=', workshop.id)
		.where('kind', 'in', kinds)
		.orderBy('no')
		.execute();
	return facts.map(({ kind }) => kind);
}

const endings = (shop: Shop) => factKinds(shop, ['kept', 'undone', 'set-aside']);

async function runs({ server, workshop }: Shop) {
	return server.database.owner
		.selectFrom('run')
		.select(['coil_name', 'state', 'on_bobbin'])
		.where('workshop_id', '=', workshop.id)
		.where('state', '!=', 'open')
		.execute();
}

/** A bench with a coil of 300 turns, wound to its end. */
async function onCount(shop: Shop): Promise<HandWinder> {
	const winder = await shop.server.addWinder(handSettings, shop.workshop);
	await shop.server.addCoil({ name: 'Bridge', target: 300, lookEvery: 0 }, shop.workshop);
	const hand = new HandWinder(shop.server, winder);
	await hand.link();
	await expect.poll(async () => (await view(hand)).run?.state).toBe('waiting');
	await hand.wind(300);
	return hand;
}

async function view(hand: HandWinder): Promise<{ run: { state: string } | null }> {
	const answer = await fetch(`${hand.server.url}/api/v1/winders/${hand.winder.id}/live`, {
		headers: { authorization: `Bearer ${hand.winder.linkKey}` }
	});
	return (await answer.json()) as { run: { state: string } | null };
}

/** The kinds of tap this page sends from now on, as they are asked for. */
function tapsOf(page: Page): string[] {
	const kinds: string[] = [];
	page.on('request', (request) => {
		if (request.method() !== 'POST' || !request.url().endsWith('/taps')) return;
		kinds.push((request.postDataJSON() as { kind: string }).kind);
	});
	return kinds;
}

const soundMessage = 'sound is off – tap';

for (const by of ['mouse', 'touch'] as const) {
	test(`the first ${by === 'mouse' ? 'click' : 'touch'} in a new browser keeps the coil, and does not hide undo`, async ({
		shop,
		screenOf
	}) => {
		const hand = await onCount(shop);
		try {
			const page = await screenOf(shop.server, shop.workshop.maker, { sound: 'ask', hasTouch: by === 'touch' });
			const sent = tapsOf(page);
			const bench = await new BenchPage(page).open(shop.server, hand.winder);
			await expect(bench.says(soundMessage)).toBeVisible();
			await (by === 'touch' ? bench.keep.tap() : bench.keep.click());
			await expect(bench.word).toHaveText('Kept');
			await expect(bench.undo).toBeEnabled();
			await expect(bench.says(soundMessage)).toHaveCount(0);
			await expect(bench.tap('Yes, I heard it')).toHaveCount(0);
			await expect.poll(() => endings(shop)).toEqual(['kept']);
			await expect.poll(() => runs(shop)).toEqual([{ coil_name: 'Bridge', state: 'kept', on_bobbin: 300 }]);
			expect(sent).toEqual(['keep']);
		} finally {
			await hand.end();
		}
	});
}

test('the first tap in a new browser starts the coil, and then the sound is asked about', async ({
	shop,
	screenOf
}) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 300, lookEvery: 0 }, workshop);
	const hand = new HandWinder(server, winder);
	try {
		const page = await screenOf(server, workshop.maker, { sound: 'ask' });
		const sent = tapsOf(page);
		const bench = await new BenchPage(page).open(server, winder);
		await hand.link();
		await expect(bench.says(soundMessage)).toBeVisible();
		await bench.tap('Start this coil').click();
		await expect(bench.word).toHaveText('Stopped');
		await expect(bench.says('Did you hear it?')).toBeVisible();
		await bench.tap('Yes, I heard it').click();
		await expect(bench.tap('Yes, I heard it')).toHaveCount(0);
		await expect(bench.tap('Set aside')).toBeVisible();
		await expect.poll(() => factKinds(shop, ['started', 'moved'])).toEqual(['started']);
		expect(sent).toEqual(['start']);
	} finally {
		await hand.end();
	}
});

test('the first tap in a new browser answers a look', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 1_000, lookEvery: 500 }, workshop);
	const hand = new HandWinder(server, winder);
	try {
		const page = await screenOf(server, workshop.maker, { sound: 'ask' });
		const sent = tapsOf(page);
		const bench = await new BenchPage(page).open(server, winder);
		await hand.link();
		await expect(bench.says(soundMessage)).toBeVisible();
		await hand.turn(98);
		await hand.stop();
		await bench.tap('Looks even').click();
		await expect(bench.word).toHaveText('Paused');
		await expect.poll(() => factKinds(shop, ['look-seen', 'look-passed'])).toEqual(['look-seen']);
		expect(sent).toEqual(['look']);
	} finally {
		await hand.end();
	}
});

test('a touch beside the taps wakes the sound, and its question leaves the taps where they do what they say', async ({
	shop,
	screenOf
}) => {
	const hand = await onCount(shop);
	try {
		const page = await screenOf(shop.server, shop.workshop.maker, { sound: 'ask' });
		const sent = tapsOf(page);
		const bench = await new BenchPage(page).open(shop.server, hand.winder);
		await expect(bench.says(soundMessage)).toBeVisible();
		await bench.count.click();
		await expect(bench.tap('No, screen only')).toBeVisible();
		expect(sent).toEqual([]);
		await bench.keep.click();
		await expect(bench.word).toHaveText('Kept');
		await expect.poll(() => endings(shop)).toEqual(['kept']);
		expect(sent).toEqual(['keep']);
	} finally {
		await hand.end();
	}
});

test('a double tap on keep keeps once and undoes nothing', async ({ shop, screenOf }) => {
	const hand = await onCount(shop);
	try {
		const bench = await new BenchPage(await screenOf(shop.server, shop.workshop.maker)).open(shop.server, hand.winder);
		await bench.keep.dblclick();
		await expect(bench.word).toHaveText('Kept');
		await expect(bench.undo).toBeEnabled();
		await expect.poll(() => endings(shop)).toEqual(['kept']);
		await expect.poll(() => runs(shop)).toEqual([{ coil_name: 'Bridge', state: 'kept', on_bobbin: 300 }]);
	} finally {
		await hand.end();
	}
});

for (const key of ['PageDown', 'Space', 'Enter']) {
	test(`a pedal that sends ${key} and bounces keeps once and undoes nothing`, async ({ shop, screenOf }) => {
		const hand = await onCount(shop);
		try {
			const page = await screenOf(shop.server, shop.workshop.maker);
			const bench = await new BenchPage(page).open(shop.server, hand.winder);
			await expect(bench.keep).toBeVisible();
			for (let bounce = 0; bounce < 3; bounce++) await page.keyboard.press(key);
			await expect(bench.word).toHaveText('Kept');
			await expect(bench.undo).toBeEnabled();
			await expect.poll(() => endings(shop)).toEqual(['kept']);
			await expect.poll(() => runs(shop)).toEqual([{ coil_name: 'Bridge', state: 'kept', on_bobbin: 300 }]);
		} finally {
			await hand.end();
		}
	});
}

test('a kept coil can be undone, and kept again it is still one record', async ({ shop, screenOf }) => {
	const hand = await onCount(shop);
	try {
		const page = await screenOf(shop.server, shop.workshop.maker);
		const bench = await new BenchPage(page).open(shop.server, hand.winder);
		await bench.keep.click();
		await expect(bench.word).toHaveText('Kept');
		await bench.undo.click();
		await expect(bench.word).toHaveText('On the mark');
		await expect.poll(() => runs(shop)).toEqual([]);
		await bench.press('Keep this coil', bench.undo);
		await expect.poll(() => endings(shop)).toEqual(['kept', 'undone', 'kept']);
		await expect.poll(() => runs(shop)).toEqual([{ coil_name: 'Bridge', state: 'kept', on_bobbin: 300 }]);
		await page.goto(`${shop.server.url}/book`);
		await expect(page.getByRole('row').filter({ hasText: 'Bridge' })).toHaveCount(1);
	} finally {
		await hand.end();
	}
});

test('two screens of one bench show the same, and a tap on one shows on the other', async ({ shop, screenOf }) => {
	const { server, workshop } = shop;
	const winder = await server.addWinder(handSettings, workshop);
	await server.addCoil({ name: 'Bridge', target: 1_000, lookEvery: 500 }, workshop);
	const hand = new HandWinder(server, winder);
	try {
		const tablet = await new BenchPage(await screenOf(server, workshop.maker)).open(server, winder);
		const phoneSize = { viewport: { width: 390, height: 844 } };
		const phone = await new BenchPage(await screenOf(server, workshop.owner, phoneSize)).open(server, winder);
		const both = async (word: string | RegExp, count: string, beside: string) => {
			for (const bench of [tablet, phone]) {
				await expect(bench.word).toHaveText(word);
				await expect(bench.count).toHaveText(count);
				await expect(bench.beside).toHaveText(beside);
			}
		};
		await both('Waiting', '0', '1,000 left');
		await hand.link();
		await hand.turn(98);
		await both('Look', '98', '902 left');
		await hand.stop();
		await expect(phone.tap('high at one side')).toBeVisible();
		await tablet.tap('high at one side').click();
		await both('Paused', '98', '902 left');
		await expect(phone.tap('high at one side')).toHaveCount(0);

		await hand.turn(872);
		await both('Ease off', '970', '30 left');
		await hand.turn(28);
		await both('Stop', '998', '2 left');
		for (const bench of [tablet, phone]) await expect(bench.page.getByRole('button')).toHaveCount(0);
		await hand.turn(4);
		await both('Stop', '1,002', '2 over');
		await hand.stop();
		await both('2 over', '1,002', '');

		await phone.keep.click();
		await expect(tablet.word).toHaveText('Kept');
		await expect(phone.word).toHaveText('Kept');
		await expect(tablet.beside).toHaveText((await phone.beside.textContent())!);
		await tablet.undo.click();
		await both('2 over', '1,002', '');
	} finally {
		await hand.end();
	}
});

test('a keep tapped on two screens at once makes one record', async ({ shop, screenOf, troubles }) => {
	const { server, workshop } = shop;
	// The later of the two is told that there is nothing to keep any more.
	troubles.expect(/answer 409: POST \S+\/taps/);
	const hand = await onCount(shop);
	try {
		const screens = [await screenOf(server, workshop.maker), await screenOf(server, workshop.owner)];
		const benches = screens.map((page) => new BenchPage(page));
		for (const bench of benches) {
			await bench.open(server, hand.winder);
			await expect(bench.keep).toBeVisible();
		}
		await Promise.all(benches.map((bench) => bench.keep.evaluate((button: HTMLElement) => button.click())));
		for (const bench of benches) {
			await expect(bench.word).toHaveText('Kept');
			await expect(bench.undo).toBeEnabled();
		}
		await expect.poll(() => endings(shop)).toEqual(['kept']);
		await expect.poll(() => runs(shop)).toEqual([{ coil_name: 'Bridge', state: 'kept', on_bobbin: 300 }]);
	} finally {
		await hand.end();
	}
});
