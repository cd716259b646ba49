import type { Page } from '@playwright/test';
import { wholeText } from '../../src/lib/format.ts';
import { BenchPage, simulate } from './bench-page.ts';
import { expect, signIn, test } from './fixtures.ts';

const speedUp = 15;

interface Wanted {
	name: string;
	target: number;
	lookEvery: number;
	looks: number[];
}

const cases: { carrier: 'ws' | 'http'; coils: Wanted[] }[] = [
	{
		carrier: 'ws',
		coils: [
			{ name: 'Bridge, screw coil', target: 1_200, lookEvery: 500, looks: [100, 500, 1_000] },
			{ name: 'Bridge, slug coil', target: 180, lookEvery: 0, looks: [] }
		]
	},
	{
		carrier: 'http',
		coils: [
			{ name: 'Neck, screw coil', target: 300, lookEvery: 200, looks: [100, 200] },
			{ name: 'Neck, slug coil', target: 180, lookEvery: 0, looks: [] }
		]
	}
];

async function queue(page: Page, { name, target, lookEvery }: Wanted): Promise<void> {
	await page.getByLabel('Name', { exact: true }).fill(name);
	await page.getByLabel('Target').fill(String(target));
	await page.getByLabel('Look every, 0 for none').fill(String(lookEvery));
	await page.getByRole('button', { name: 'Put in the queue' }).click();
	await expect(page.getByRole('status').filter({ hasText: 'The coil was put in the queue.' })).toBeAttached();
	await expect(page.getByText(name, { exact: true }).first()).toBeVisible();
}

for (const { carrier, coils } of cases) {
	test(`two coils from the queue are wound, kept and found in the book, over ${carrier}`, async ({ shop, page }) => {
		const { server, workshop } = shop;
		const winder = await server.addWinder({ timeScale: speedUp }, workshop);
		await page.setViewportSize({ width: 1180, height: 820 });
		await signIn(page, server, workshop.maker);
		await expect(page.getByRole('heading', { name: 'Wind', level: 1 })).toBeVisible();
		for (const coil of coils) await queue(page, coil);

		await page.getByRole('link', { name: 'Open the bench of w-01' }).click();
		const bench = new BenchPage(page);
		const sim = simulate(server, winder, { carrier, speedUp });
		try {
			const stickers: string[] = [];
			for (const [at, coil] of coils.entries()) {
				if (at === 0) {
					await expect(page.getByRole('heading', { name: coil.name })).toBeVisible();
					await bench.tap('Start this coil').click();
					await bench.tap('Yes, I heard it').click();
				}
				const words = await bench.noteWords();
				await sim.goOn('preparing');
				await expect(page.getByRole('heading', { name: coil.name })).toBeVisible();

				for (const [look, mark] of coil.looks.entries()) {
					await expect.poll(() => sim.looks().length).toBe(look + 1);
					await expect(bench.word).toHaveText('Look');
					const turns = sim.looks()[look]!;
					expect(Math.abs(turns - mark)).toBeLessThan(30);
					await expect(bench.count).toHaveText(wholeText(turns));
					await bench.tap('Looks even').click();
					await expect(bench.tap('Looks even')).toBeHidden();
					await sim.goOn('looking');
				}

				await expect.poll(() => sim.reached().length).toBe(at + 1);
				const wound = sim.reached()[at]!;
				await expect(bench.count).toHaveText(wholeText(wound));
				const off = wound - coil.target;
				await expect(bench.word).toHaveText(off === 0 ? 'On the mark' : off > 0 ? `${off} over` : `${-off} short`);
				expect(await words()).toContain('Ease off');
				await bench.keep.click();
				await expect(bench.word).toHaveText('Kept');
				stickers.push((await bench.beside.textContent())!.trim());
				await expect(bench.says(`${stickers[at]} · ${wholeText(wound)} turns`)).toBeVisible();
				const next = coils[at + 1];
				await expect(
					bench.says(next ? `next: ${next.name}, ${next.target} turns` : 'no coil waits after this one')
				).toBeVisible();
			}
			expect(new Set(stickers).size).toBe(coils.length);

			await page.goto(`${server.url}/book`);
			await expect(page.getByRole('table').getByRole('row')).toHaveCount(1 + coils.length);
			for (const [at, coil] of coils.entries()) {
				const wound = sim.reached()[at]!;
				const row = page.getByRole('row').filter({ hasText: coil.name });
				await expect(row).toContainText(stickers[at]!);
				await expect(row.getByRole('cell', { name: wholeText(coil.target), exact: true }).first()).toBeVisible();
				await expect(row.getByRole('cell', { name: wholeText(wound), exact: true }).first()).toBeVisible();
				await expect(row).toContainText(workshop.maker.name);

				await row.getByRole('link', { name: coil.name }).click();
				await expect(page.getByRole('heading', { name: coil.name, level: 1 })).toBeVisible();
				const figure = (name: string) => page.getByRole('definition').and(page.locator(`dt:text-is("${name}") + dd`));
				await expect(figure('Wanted')).toHaveText(`${wholeText(coil.target)} turns`);
				await expect(figure('On the bobbin')).toHaveText(`${wholeText(wound)} turns`);
				await expect(figure('Counted')).toHaveText(`${wholeText(wound)} turns`);
				const off = wound - coil.target;
				const offBy = off === 0 ? 'on the mark' : `${Math.abs(off)} ${off > 0 ? 'over' : 'short'}`;
				await expect(figure('Off by')).toHaveText(offBy);
				await expect(figure('Sticker')).toHaveText(stickers[at]!);

				const seenBefore = coils.slice(0, at).reduce((sum, { looks }) => sum + looks.length, 0);
				const looks = page.getByRole('table', { name: 'Looks of this run' }).getByRole('row');
				await expect(looks).toHaveCount(coil.looks.length > 0 ? 1 + coil.looks.length : 0);
				for (const [look, mark] of coil.looks.entries()) {
					const stoodAt = sim.looks()[seenBefore + look]!;
					await expect(looks.nth(1 + look).getByRole('cell')).toHaveText([
						wholeText(mark),
						wholeText(stoodAt),
						'looks even'
					]);
				}
				const happened = page.getByRole('table', { name: 'What happened, in order' });
				for (const fact of ['Ease off cue', 'Stop cue', 'On count', 'Kept with']) {
					await expect(happened.getByRole('row').filter({ hasText: fact })).toHaveCount(1);
				}
				await page.goBack();
			}
			expect(sim.problems).toEqual([]);
		} finally {
			await sim.simulation.stop();
		}
	});
}
