/**
 * Comma-separated values as RFC 4180 has them: CRLF line ends, a header line, quotes doubled inside quotes.
 *
 * The file is UTF-8 and begins with a byte order mark: without it the common spreadsheet programs read names with
 * accents in their own old code page. Readers that know UTF-8 skip it.
 */

/** null is an empty cell. Numbers stay numbers; text is never taken for a formula. */
export type Cell = string | number | null;

const byteOrderMark = '\ufeff';

/**
 * What makes a spreadsheet read a cell as a formula when it comes first, the full-width forms included; tab, CR and LF
 * count because some programs drop them and look at what follows.
 */
const startsFormula = /^[=+\-@\t\r\n＝＋－＠]/;

/** Cells that need quotes: the separator, a quote, a line end, or outer spaces a reader might drop. */
const needsQuotes = /[",\r\n\t]|^\s|\s$/;

function cellText(cell: Cell): string {
	if (cell === null) return '';
	if (typeof cell === 'number') return Number.isFinite(cell) ? String(cell) : '';
	// PostgreSQL stores no NUL, but a file may be made of other text as well.
	const plain = cell.replaceAll('\0', '');
	// The apostrophe is what people type themselves to say "this is text"; it stays visible in plain readers.
	const safe = startsFormula.test(plain) ? `'${plain}` : plain;
	return needsQuotes.test(safe) ? `"${safe.replaceAll('"', '""')}"` : safe;
}

/** One line with its CRLF. */
export function csvLine(cells: readonly Cell[]): string {
	return cells.map(cellText).join(',') + '\r\n';
}

/** A whole file: byte order mark, header, lines. */
export function csvFile(header: readonly string[], rows: Iterable<readonly Cell[]>): string {
	let text = byteOrderMark + csvLine(header);
	for (const row of rows) text += csvLine(row);
	return text;
}
