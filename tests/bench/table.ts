/** A Markdown table with its columns padded, as the formatter of this project leaves it. Columns but the first are numbers. */
export function markdownTable(head: readonly string[], rows: readonly (readonly string[])[]): string {
	const cell = (text: string | undefined) => (text ?? '').replaceAll('|', '\\|');
	const all = [head, ...rows].map((row) => head.map((_, column) => cell(row[column])));
	const widths = head.map((_, column) => Math.max(3, ...all.map((row) => (row[column] as string).length)));
	const line = (row: readonly string[]) =>
		`| ${row.map((text, i) => (i === 0 ? text.padEnd(widths[i] ?? 0) : text.padStart(widths[i] ?? 0))).join(' | ')} |`;
	const rule = widths.map((width, i) => (i === 0 ? '-'.repeat(width) : `${'-'.repeat(width - 1)}:`));
	return [line(all[0] as string[]), line(rule), ...all.slice(1).map(line)].join('\n');
}
