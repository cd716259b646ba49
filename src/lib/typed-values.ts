/**
 * Values as people type them. Read generously where only one meaning is possible, refused where there are two.
 */

/** A point or a comma before exactly three digits can only group thousands: turns are whole. */
const grouped = /^[1-9]\d{0,2}(?:([,.'’ ])\d{3})(?:\1\d{3})*$/;

/**
 * A whole number typed with or without thousands marks ("5320", "5,320", "5 320", "5.320", "5320 turns").
 *
 * @param unit words that may follow the number, such as `['turns', 'turn']`
 * @returns the number, or null where the text is none: blank, "1e9", "10⁹", "5,32", "-3", digits of other scripts
 */
export function typedWhole(text: string, unit: readonly string[] = []): number | null {
	let rest = text.replace(/[\u00a0\u2009\u202f]/g, ' ').trim();
	for (const word of unit) {
		if (rest.toLowerCase().endsWith(word)) {
			rest = rest.slice(0, rest.length - word.length).trim();
			break;
		}
	}
	if (grouped.test(rest)) rest = rest.replace(/[,.'’ ]/g, '');
	// Sixteen digits pass 2^53; whoever types that many is over any limit already.
	if (!/^\d{1,15}$/.test(rest)) return null;
	return Number(rest);
}

/** One line of text as it is stored: composed, without control characters, halves of characters or line ends, without outer spaces. */
export function typedLine(text: string): string {
	return text
		.normalize('NFC')
		.replace(/[\p{Cc}\p{Cs}]+/gu, ' ')
		.trim();
}

/** Text of several lines as it is stored: line ends as LF, no other control characters but tab, no outer spaces. */
export function typedText(text: string): string {
	return text
		.normalize('NFC')
		.replace(/\r\n?/g, '\n')
		.replace(/(?![\n\t])[\p{Cc}\p{Cs}]/gu, '')
		.trim();
}

/**
 * The characters PostgreSQL's char_length counts: code points, so that a name of emoji is measured the same on both
 * sides.
 */
export function lengthOf(text: string): number {
	return [...text].length;
}

/**
 * A day written YYYY-MM-DD, as a date field sends it.
 *
 * @returns the same text, or null when it is no day between 2000 and 2199
 */
export function typedDay(text: string): string | null {
	const found = /^(2[01]\d\d)-(\d\d)-(\d\d)$/.exec(text.trim());
	if (!found) return null;
	const [, year, month, day] = found;
	const date = new Date(Date.UTC(Number(year), Number(month) - 1, Number(day)));
	return date.toISOString().startsWith(found[0]) ? found[0] : null;
}

/** More of a refused value would not fit beside the reason. */
const shownCharactersMax = 40;

/** What to say of a refused value, with the value as it stands in the field. */
export function keptAsTyped(typed: string): string {
	const shown = typed.trim();
	return shown === '' ? 'nothing was typed.' : `${quoted(shown)} was kept as typed.`;
}

/** A typed value in quotation marks, cut where it is long. */
export function quoted(typed: string): string {
	const shown = typed.trim();
	const cut = lengthOf(shown) > shownCharactersMax;
	return `“${[...shown].slice(0, shownCharactersMax).join('')}${cut ? '…' : ''}”`;
}
