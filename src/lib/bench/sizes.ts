/**
 * How large the bench must write so that it is read from where the maker stands. Lengths named `…Px` are CSS pixels.
 *
 * Height of a letter at distance D under the visual angle θ: h = 2·D·tan(θ/2). ISO 9241-303 wants 16′ at least and prefers
 * 20′ to 22′ for reading; the count, read at a glance, gets three times that.
 */

/** Height of capitals and flat digits of the font in em; measured from the bold and the regular face in a browser. */
export const capHeightEm = 0.672;
/** Widths in em of the bold face with figures of equal width, measured likewise. */
export const digitWidthEm = 0.632;
export const commaWidthEm = 0.243;

export const countMinutes = 69;
export const farMinutes = 22;
export const nearMinutes = 21;

/** Taps are at least this large and this far apart, for gloved or sticky fingers. */
export const tapMm = 20;
export const tapGapMm = 5;

/** Pixels per mm until a screen has been measured: a tablet of 10.9″ with 1180 × 820, and common phones. */
export const tabletPxPerMm = 5.2;
export const phonePxPerMm = 6;
/** ISO/IEC 7810 ID-1, the width of a bank card. */
export const cardWidthMm = 85.6;
/** Outside of these a measure is a slip of the hand: no screen people wind by has them. */
export const pxPerMmRange = { min: 2.5, max: 12 };

/** A phone is held or stands within reach. */
export const phoneStandM = 0.7;
export const tabletStandM = 2;
/** The near tier is read from the bench in front of a tablet (5 mm are 21′ at 0.8 m); a phone is picked up. */
const tabletNearMm = 5;
const phoneNearM = 0.4;

/** A screen whose shorter side is below this is a phone. */
const phoneSidePx = 500;

/** Widest of the far tier's lines in em of the bold face: shape, "Signed out 59:59 ago" or "Stopped 10,240 left", a gap. */
const farWideEm = 11;
/** Widest of its words alone, beside the shape: "Which winder?". */
const farTallEm = 7.95;

/** A letter of the near tier takes about half an em. */
const nearLetterEm = 0.5;

const nearRowEm = 1.5;
/** Two lines of the near tier below the count: a question, and a remark. */
const toldRowsEm = 2.4;
const farRowEm = 1.16;
/** Of the count's own size: from the top of its line to below its comma. */
const countBoxEm = 1.03;
/** Margins and the like that grow with nothing. */
const restPx = 40;

export interface Screen {
	widthPx: number;
	heightPx: number;
	/** As measured with a card; null: not yet. */
	pxPerMm: number | null;
	/** Where the maker stands; null: not said. */
	standM: number | null;
	/** Digits the count must have room for. */
	digits: number;
}

export interface Sizes {
	/** `tall`: the state word and what is left stand on two lines. */
	layout: 'wide' | 'tall';
	phone: boolean;
	pxPerMm: number;
	standM: number;
	nearPx: number;
	/** About so many letters of the near tier fit in one row. */
	nearRowLetters: number;
	farPx: number;
	countPx: number;
	/** From the top of the bobbin to the count's line, so that it stands still whatever is said below it. */
	countTopPx: number;
	/** Margin left and right, and the thickness of a flange. */
	padPx: number;
	flangePx: number;
	tapPx: number;
	gapPx: number;
	/** Height of one row of taps. */
	footPx: number;
	/** Farthest distance at which the state word still has its 22′ and the count its 69′. */
	farReadableM: number;
	countReadableM: number;
}

const radians = (minutes: number) => (minutes / 60) * (Math.PI / 180);

/** Height in mm that a letter needs to be seen under `minutes` of arc from `distanceM`. */
export function heightMm(distanceM: number, minutes: number): number {
	return 2 * distanceM * 1000 * Math.tan(radians(minutes) / 2);
}

/** Distance in m from which a letter of `mm` is seen under `minutes` of arc. */
export function distanceM(mm: number, minutes: number): number {
	return mm / 1000 / (2 * Math.tan(radians(minutes) / 2));
}

/** Width in em of a count with so many digits, thousands parted by commas. */
export function countWidthEm(digits: number): number {
	return digits * digitWidthEm + Math.floor((digits - 1) / 3) * commaWidthEm;
}

export function isPhone(widthPx: number, heightPx: number): boolean {
	return Math.min(widthPx, heightPx) < phoneSidePx;
}

export function sizesFor(screen: Screen): Sizes {
	const { widthPx, heightPx } = screen;
	const phone = isPhone(widthPx, heightPx);
	const pxPerMm = screen.pxPerMm ?? (phone ? phonePxPerMm : tabletPxPerMm);
	const standM = screen.standM ?? (phone ? phoneStandM : tabletStandM);
	const fontPx = (mm: number) => (mm * pxPerMm) / capHeightEm;
	const layout = widthPx < heightPx ? 'tall' : 'wide';
	const padPx = phone ? 16 : 36;
	const flangePx = phone ? 8 : 14;
	const tapPx = Math.ceil(tapMm * pxPerMm);
	const gapPx = Math.ceil(tapGapMm * pxPerMm);

	const lineEm = (layout === 'wide' ? farWideEm : farTallEm) + Math.max(0, screen.digits - 5) * digitWidthEm;
	// Rounded up so that a tier never falls short of its mm, unless the screen itself is too small for it.
	const farPx = Math.floor(Math.min(Math.ceil(fontPx(heightMm(standM, farMinutes))), (widthPx - 2 * padPx) / lineEm));
	// The longest near line has about 28 letters of half an em beside the clock.
	const nearPx = Math.floor(
		Math.min(Math.ceil(fontPx(phone ? heightMm(phoneNearM, nearMinutes) : tabletNearMm)), (widthPx - 2 * padPx) / 14)
	);

	// A standing tablet or phone has room for three rows of taps and needs them; a lying one has one row.
	const footPx =
		layout === 'wide' ? Math.round(Math.min(Math.max(tapPx, heightPx * 0.19), 1.6 * tapPx)) : Math.round(tapPx);
	const rows = layout === 'wide' ? 1 : 3;
	const nearEm = (layout === 'wide' ? nearRowEm : 2 * nearRowEm) + toldRowsEm;
	const farRows = layout === 'wide' ? 1 : 2;
	const otherPx = nearEm * nearPx + farRows * farRowEm * farPx + rows * footPx + (rows - 1) * gapPx + restPx;
	const bobbinPx = Math.max(heightPx - otherPx, 48);
	// Two pixels of air on either side of the digits.
	const innerPx = widthPx - 2 * padPx - 2 * flangePx - 4;
	const countPx = Math.floor(Math.min(innerPx / countWidthEm(Math.max(screen.digits, 1)), bobbinPx / countBoxEm));

	const mm = (px: number) => (px * capHeightEm) / pxPerMm;
	return {
		layout,
		phone,
		pxPerMm,
		standM,
		nearPx,
		nearRowLetters: Math.floor((widthPx - 2 * padPx) / (nearPx * nearLetterEm)),
		farPx,
		countPx,
		countTopPx: Math.floor((bobbinPx - countBoxEm * countPx) / 2),
		padPx,
		flangePx,
		tapPx,
		gapPx,
		footPx,
		farReadableM: distanceM(mm(farPx), farMinutes),
		countReadableM: distanceM(mm(countPx), countMinutes)
	};
}

/** Pixels per mm from a card held to the screen; null when nothing a screen could have. */
export function pxPerMmFromCard(cardPx: number): number | null {
	const pxPerMm = cardPx / cardWidthMm;
	return pxPerMm >= pxPerMmRange.min && pxPerMm <= pxPerMmRange.max ? pxPerMm : null;
}
