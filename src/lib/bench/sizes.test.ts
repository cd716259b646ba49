import { describe, expect, it } from 'vitest';
import { capHeightEm, countWidthEm, distanceM, heightMm, pxPerMmFromCard, sizesFor, type Screen } from './sizes.ts';

const design: Screen = { widthPx: 1180, heightPx: 820, pxPerMm: null, standM: null, digits: 5 };
const mm = (px: number, pxPerMm: number) => (px * capHeightEm) / pxPerMm;

describe('visual angle', () => {
	it('22′ at 2 m are 12.8 mm, 69′ are 40 mm, 21′ at 0.8 m are 4.9 mm', () => {
		// h = 2·D·tan(θ/2), worked out by hand: 4000·tan(11′) = 12.80, 4000·tan(34.5′) = 40.15, 1600·tan(10.5′) = 4.887.
		expect(heightMm(2, 22)).toBeCloseTo(12.8, 2);
		expect(heightMm(2, 69)).toBeCloseTo(40.15, 1);
		expect(heightMm(0.8, 21)).toBeCloseTo(4.887, 2);
	});

	it('distance undoes height', () => {
		expect(distanceM(heightMm(1.7, 22), 22)).toBeCloseTo(1.7, 9);
	});
});

describe('sizes', () => {
	it('a 10.9″ tablet at 2 m has a count of 40 mm, a far tier of 12.8 mm and taps of 20 mm with five digits', () => {
		const sizes = sizesFor(design);
		expect(mm(sizes.countPx, 5.2)).toBeGreaterThanOrEqual(40);
		expect(mm(sizes.farPx, 5.2)).toBeGreaterThanOrEqual(12.8);
		expect(mm(sizes.nearPx, 5.2)).toBeGreaterThanOrEqual(5);
		expect(sizes.tapPx / 5.2).toBeGreaterThanOrEqual(20);
		expect(sizes.gapPx / 5.2).toBeGreaterThanOrEqual(5);
		expect(sizes.footPx).toBeGreaterThanOrEqual(sizes.tapPx);
	});

	it('1280 × 800 keeps them', () => {
		const sizes = sizesFor({ ...design, widthPx: 1280, heightPx: 800 });
		expect(mm(sizes.countPx, 5.2)).toBeGreaterThanOrEqual(40);
		expect(mm(sizes.farPx, 5.2)).toBeGreaterThanOrEqual(12.8);
	});

	it.each([
		[1180, 820, 5],
		[1280, 800, 5],
		[820, 1180, 5],
		[390, 844, 5],
		[360, 640, 5],
		[844, 390, 5],
		[1920, 1080, 6],
		[320, 568, 6]
	])('on %i × %i %i digits fit between the flanges', (widthPx, heightPx, digits) => {
		const sizes = sizesFor({ ...design, widthPx, heightPx, digits });
		const inner = widthPx - 2 * sizes.padPx - 2 * sizes.flangePx;
		expect(sizes.countPx * countWidthEm(digits)).toBeLessThanOrEqual(inner);
		expect(sizes.countPx).toBeGreaterThan(sizes.nearPx);
	});

	it('a phone is read from 0.7 m: its far tier has 22′ there', () => {
		const sizes = sizesFor({ ...design, widthPx: 390, heightPx: 844, digits: 4 });
		expect(sizes).toMatchObject({ phone: true, layout: 'tall', standM: 0.7 });
		expect(sizes.farReadableM).toBeGreaterThanOrEqual(0.7);
		// Four digits have about 68′ on a phone held upright, three times what reading needs.
		expect(sizes.countReadableM).toBeGreaterThan(0.67);
	});

	it('standing farther away asks for more than the screen has, and the sizes say how far they carry', () => {
		const far = sizesFor({ ...design, standM: 3 });
		expect(far.farReadableM).toBeLessThan(3);
		expect(far.farPx).toBeGreaterThanOrEqual(sizesFor(design).farPx);
		const near = sizesFor({ ...design, standM: 1 });
		expect(near.farPx).toBeLessThan(sizesFor(design).farPx);
		expect(near.farReadableM).toBeGreaterThanOrEqual(1);
	});

	it('a finer screen gets more pixels for the same mm', () => {
		const coarse = sizesFor({ ...design, pxPerMm: 4.4 });
		const fine = sizesFor({ ...design, pxPerMm: 5.2 });
		expect(fine.tapPx).toBeGreaterThan(coarse.tapPx);
		expect(fine.nearPx).toBeGreaterThan(coarse.nearPx);
	});

	it('the count grows only with its digits, not with the count itself', () => {
		expect(sizesFor({ ...design, widthPx: 390, heightPx: 844, digits: 4 }).countPx).toBeGreaterThan(
			sizesFor({ ...design, widthPx: 390, heightPx: 844, digits: 5 }).countPx
		);
	});
});

describe('the card', () => {
	it('a card of 445 px is 5.2 pixels per mm', () => {
		expect(pxPerMmFromCard(445.12)).toBeCloseTo(5.2, 6);
	});

	it('a slip of the slider is no measure', () => {
		expect(pxPerMmFromCard(100)).toBeNull();
		expect(pxPerMmFromCard(1100)).toBeNull();
	});
});
