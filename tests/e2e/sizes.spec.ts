import type { Page } from '@playwright/test';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { addSpec } from '../../src/lib/server/db/specs.ts';
import { addSpool } from '../../src/lib/server/db/spools.ts';
import { startingSpec } from '../../src/lib/spec/start.ts';
import { BenchPage } from './bench-page.ts';
import { HandWinder, handSettings } from './hand-winder.ts';
import { expect, test } from './fixtures.ts';

/** Height of a letter seen from `distanceM` under `minutes` of arc (ISO 9241-303): h = 2·D·tan(θ/2), in mm. */
function heightMm(distanceM: number, minutes: number): number {
	return 2 * distanceM * 1000 * Math.tan((minutes / 60) * (Math.PI / 360));
}

interface Screen {
	name: string;
	viewport: { width: number; height: number };
	pxPerMm: number;
	/** Least heights of digits or capitals. */
	mm: { count: number; far: number; near: number };
}

/**
 * A tablet of 10.9″ has 5.2 px a mm and is read from 2 m: 69′ for the count, 22′ for the far tier, 5 mm near. A phone is
 * read from 0.7 m, its near tier from the hand; five digits of 69′ would be wider than an upright one, which leaves 55′.
 */
const tablet = { pxPerMm: 5.2, mm: { count: 40, far: 12.8, near: 5 } };
const phone = { pxPerMm: 6, mm: { count: heightMm(0.7, 55), far: heightMm(0.7, 22), near: heightMm(0.4, 20) } };
const screens: Screen[] = [
	{ name: 'phone', viewport: { width: 390, height: 844 }, ...phone },
	{ name: 'tablet', viewport: { width: 1180, height: 820 }, ...tablet },
	{ name: 'wide screen', viewport: { width: 1280, height: 800 }, ...tablet }
];
/** Taps are at least so large and so far apart. */
const tapMm = { side: 20, gap: 5 };
/** Boxes are laid out in parts of a pixel. */
const slackPx = 0.5;

interface Measured {
	tiers: { tier: string; text: string; px: number }[];
	/** Texts cut off, outside the screen, or drawn over one another. */
	faults: string[];
	taps: { label: string; field: boolean; left: number; top: number; right: number; bottom: number }[];
	tooWidePx: number;
}

/** What is really on the screen: heights from the glyphs of the font in use, boxes as laid out. */
function measure(page: Page): Promise<Measured> {
	return page.evaluate(() => {
		const context = document.createElement('canvas').getContext('2d')!;
		const glyph = (element: Element, letter: string) => {
			const { fontStyle, fontWeight, fontSize, fontFamily } = getComputedStyle(element);
			context.font = `${fontStyle} ${fontWeight} ${fontSize} ${fontFamily}`;
			return context.measureText(letter);
		};
		const inks: { name: string; left: number; right: number; top: number; bottom: number }[] = [];
		const faults: string[] = [];
		const tiers = [];
		const written = document.querySelectorAll('main [data-tier], main button span, main button.confirm, main input');
		for (const element of written) {
			const text = element instanceof HTMLInputElement ? element.value : (element.textContent ?? '').trim();
			if (text === '') continue;
			const tier = element.getAttribute('data-tier') ?? 'near';
			const name = `${tier} “${text}”`;
			const letter = glyph(element, tier === 'count' ? '0' : 'H');
			tiers.push({ tier, text, px: letter.actualBoundingBoxAscent });
			if (element.scrollWidth > element.clientWidth + 1 && element.clientWidth > 0) faults.push(`${name} is cut off`);
			const range = document.createRange();
			range.selectNodeContents(element);
			const lines = element instanceof HTMLInputElement ? [element.getBoundingClientRect()] : range.getClientRects();
			for (const box of lines) {
				if (box.width === 0) continue;
				// The line's box is taller than its letters, which stand on the baseline in the middle of it.
				const { fontBoundingBoxAscent: ascent, fontBoundingBoxDescent: descent } = letter;
				const baseline = box.top + (box.height - ascent - descent) / 2 + ascent;
				const ink = {
					name,
					left: box.left,
					right: box.right,
					top: baseline - letter.actualBoundingBoxAscent,
					bottom: baseline
				};
				if (ink.left < -1 || ink.right > innerWidth + 1 || ink.top < -1 || ink.bottom > innerHeight + 1) {
					faults.push(`${name} is off the screen`);
				}
				const button = element.closest('button');
				const frame = button?.getBoundingClientRect();
				if (
					frame &&
					(box.left < frame.left || box.right > frame.right || ink.top < frame.top || ink.bottom > frame.bottom)
				) {
					faults.push(`${name} does not fit its tap`);
				}
				const over = inks.find(
					(other) =>
						other.name !== name &&
						ink.left < other.right - 1 &&
						other.left < ink.right - 1 &&
						ink.top < other.bottom - 1 &&
						other.top < ink.bottom - 1
				);
				if (over) faults.push(`${name} is written over ${over.name}`);
				inks.push(ink);
			}
		}
		const taps = [...document.querySelectorAll('main button, main input')].map((element) => {
			const { left, top, right, bottom } = element.getBoundingClientRect();
			const label = element.textContent?.trim() || element.getAttribute('aria-label') || '';
			if (left < 0 || top < 0 || right > innerWidth + 1 || bottom > innerHeight + 1) {
				faults.push(`the tap “${label}” is off the screen`);
			}
			return { label, field: element instanceof HTMLInputElement, left, top, right, bottom };
		});
		return { tiers, faults, taps, tooWidePx: document.documentElement.scrollWidth - innerWidth };
	});
}

/** Everything wrong with the sizes of what is shown now. */
async function judge(page: Page, { pxPerMm, mm }: Screen): Promise<string[]> {
	await page.evaluate(() => document.fonts.ready);
	const { tiers, faults, taps, tooWidePx } = await measure(page);
	const wrong = [...faults];
	if (tooWidePx > 0) wrong.push(`the page is ${tooWidePx} px too wide`);
	for (const { tier, text, px } of tiers) {
		const least = mm[tier as keyof typeof mm];
		if (px < least * pxPerMm - slackPx) {
			wrong.push(`${tier} “${text}” is ${(px / pxPerMm).toFixed(2)} mm high, not ${least.toFixed(2)}`);
		}
	}
	const sidePx = tapMm.side * pxPerMm - slackPx;
	for (const [at, tap] of taps.entries()) {
		const [width, height] = [tap.right - tap.left, tap.bottom - tap.top];
		// A field is typed into; the taps beside it step its count.
		if (!tap.field && (width < sidePx || height < sidePx))
			wrong.push(`the tap “${tap.label}” is ${width} × ${height} px`);
		for (const other of taps.slice(at + 1)) {
			const apart = Math.max(
				other.left - tap.right,
				tap.left - other.right,
				other.top - tap.bottom,
				tap.top - other.bottom
			);
			if (apart < tapMm.gap * pxPerMm - slackPx)
				wrong.push(`“${tap.label}” and “${other.label}” are ${apart} px apart`);
		}
	}
	return wrong;
}

for (const screen of screens) {
	test(`on a ${screen.name} the bench is read from where the maker stands, with five digits`, async ({
		shop,
		screenOf
	}) => {
		const { server, workshop } = shop;
		const winder = await server.addWinder(handSettings, workshop);
		await server.addCoil({ name: 'Bridge, screw coil', target: 12_345, lookEvery: 10_240 }, workshop);
		await server.addCoil({ name: 'Bridge, slug coil', target: 10_300, lookEvery: 0 }, workshop);
		const page = await screenOf(server, workshop.maker, { viewport: screen.viewport });
		const hand = new HandWinder(server, winder);
		const wrong: Record<string, string[]> = {};
		const bench = new BenchPage(page);
		const look = async (state: string) => {
			const found = await judge(page, screen);
			if (found.length > 0) wrong[state] = found;
		};
		try {
			await bench.open(server, winder);
			await hand.link();
			await expect(bench.tap('Start this coil')).toBeVisible();
			await look('waiting');
			await hand.turn(10_000);
			await expect(bench.count).toHaveText('10,000');
			await expect(bench.word).toHaveText('Winding');
			await look('winding');
			await hand.turn(237);
			await hand.stop();
			await expect(bench.tap('Looks even')).toBeVisible();
			await look('at a look');
			await bench.press('Looks even', bench.tap('Set aside'));
			await hand.turn(3);
			await hand.stop();
			await expect(bench.count).toHaveText('10,240');
			await expect(bench.word).toHaveText('Paused');
			await look('paused');
			await bench.press('Set aside', bench.tap('Go back'));
			await look('asked why it is set aside');
			await bench.press('Go back', bench.tap('taking off'));
			await bench.press('wire snapped', bench.tap('It left here'));
			await look('asked where the wire left');
			await bench.press('The wire held', bench.tap('taking off'));
			await hand.turn(60);
			await expect(bench.count).toHaveText('10,300');
			await hand.unlink();
			await expect(bench.word).toHaveText('No signal');
			await look('no signal');
			await hand.link();
			await hand.turn(2_010);
			await expect(bench.word).toHaveText('Ease off');
			await look('easing');
			await hand.turn(35);
			await expect(bench.word).toHaveText('Stop');
			await look('stop');
			await hand.stop();
			await expect(bench.word).toHaveText('On the mark');
			await look('on count');
			await bench.keep.click();
			await expect(bench.word).toHaveText('Kept');
			await expect(bench.undo).toBeEnabled();
			await look('kept');
			expect(wrong).toEqual({});
		} finally {
			await hand.end();
		}
	});

	test(`on a ${screen.name} the question of the sound fits beside the taps of each state`, async ({
		shop,
		screenOf
	}) => {
		const { server, workshop } = shop;
		const winder = await server.addWinder(handSettings, workshop);
		await server.addCoil({ name: 'Bridge, screw coil', target: 12_345, lookEvery: 10_240 }, workshop);
		const page = await screenOf(server, workshop.maker, { viewport: screen.viewport, sound: 'ask' });
		const hand = new HandWinder(server, winder);
		const wrong: Record<string, string[]> = {};
		const bench = new BenchPage(page);
		/** A page that is new asks anew, once it has been touched. */
		const look = async (state: string, own: string) => {
			await bench.open(server, winder);
			await expect(bench.tap(own)).toBeVisible();
			await expect(bench.says('sound is off – tap')).toBeVisible();
			await bench.count.click();
			await expect(bench.tap('Yes, I heard it')).toBeVisible();
			const found = await judge(page, screen);
			if (found.length > 0) wrong[state] = found;
		};
		try {
			await hand.link();
			await look('waiting', 'Start this coil');
			await hand.turn(10_237);
			await hand.stop();
			await look('at a look', 'Looks even');
			await bench.press('Looks even', bench.tap('Keep as it is'));
			await look('paused', 'Keep as it is');
			await hand.turn(2_108);
			await hand.stop();
			await look('on count', 'Keep this coil');
			expect(wrong).toEqual({});
		} finally {
			await hand.end();
		}
	});

	test(`on a ${screen.name} no page is wider than the screen`, async ({ shop, screenOf }) => {
		const { server, workshop } = shop;
		const winder = await server.addWinder(handSettings, workshop);
		const name = 'Bridge coil with a name as long as a name may be: eighty characters, no more: end';
		for (const note of ['', 'Thin wire: slowly. '.repeat(10)]) {
			await server.addCoil({ name: name.slice(0, 80), note, target: 12_345, lookEvery: 0 }, workshop);
			await server.addCoil({ name: 'W'.repeat(80), target: 99_999, lookEvery: 0 }, workshop);
		}
		const page = await screenOf(server, workshop.owner, { viewport: screen.viewport });
		const hand = new HandWinder(server, winder);
		const tooWide = async (path: string) => {
			await page.goto(server.url + path);
			await expect(page.getByRole('heading', { level: 1 })).toBeVisible();
			return page.evaluate(() => Math.max(0, document.documentElement.scrollWidth - innerWidth));
		};
		try {
			await hand.link();
			const bench = await new BenchPage(page).open(server, winder);
			await hand.wind(12_345);
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
			const runId = (await kept())[0]!.id;
			const people = await server.database.owner
				.selectFrom('member')
				.select('id')
				.where('workshop_id', '=', workshop.id)
				.execute();
			const long = startingSpec('two-coils', 'W'.repeat(80));
			for (const coil of long.coils) coil.name = 'W'.repeat(80);
			long.bobbin = { ...long.bobbin, name: 'W'.repeat(80), generic: null };
			const specId = await inWorkshop(server.database.owner, workshop.id, async (trx) => {
				const id = await addSpec(trx, workshop.id, long, null);
				await addSpool(
					trx,
					workshop.id,
					{ name: 'W'.repeat(80), lot: 'W'.repeat(80), wire: long.wire, note: '' },
					null
				);
				return id;
			});
			const paths = [
				'/specs',
				'/specs/new',
				'/specs/new?start=one-coil',
				`/specs/${specId}`,
				`/specs/${specId}/revisions/1`,
				`/specs/${specId}/compare`,
				'/spools',
				'/workshop/meters',
				'/wind',
				'/book',
				`/book/${runId}`,
				'/workshop/winders',
				`/workshop/winders/${winder.id}`,
				'/workshop/people',
				`/workshop/people/${people[0]!.id}`,
				'/me',
				'/not-a-page'
			];
			const found: Record<string, number> = {};
			for (const path of paths) {
				const px = await tooWide(path);
				if (px > 0) found[path] = px;
			}
			await page.context().clearCookies();
			for (const path of ['/sign-in', '/first-password/none']) {
				const px = await tooWide(path);
				if (px > 0) found[path] = px;
			}
			expect(found).toEqual({});
		} finally {
			await hand.end();
		}
	});
}
