import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { csvFile, csvLine } from './csv.ts';

/** A reader written from RFC 4180 section 2, so that what is written is judged by the rules and not by the writer. */
function read(text: string): string[][] {
	const rows: string[][] = [];
	let row: string[] = [];
	let cell = '';
	let quoted = false;
	for (let i = 0; i < text.length; i++) {
		const c = text[i];
		if (quoted) {
			if (c === '"' && text[i + 1] === '"') {
				cell += '"';
				i++;
			} else if (c === '"') quoted = false;
			else cell += c;
		} else if (c === '"') quoted = true;
		else if (c === ',') {
			row.push(cell);
			cell = '';
		} else if (c === '\r' && text[i + 1] === '\n') {
			rows.push([...row, cell]);
			row = [];
			cell = '';
			i++;
		} else cell += c;
	}
	return rows;
}

describe('a CSV file', () => {
	it('begins with a byte order mark and its header, and ends every line with CRLF', () => {
		expect(csvFile(['Coil', 'Wound'], [['Neck', 7600]])).toBe('\ufeffCoil,Wound\r\nNeck,7600\r\n');
	});

	it('keeps commas, quotes and line ends inside a cell', () => {
		expect(csvLine(['Bridge, "screw" coil', 'two\nlines'])).toBe('"Bridge, ""screw"" coil","two\nlines"\r\n');
	});

	it('keeps emoji and right-to-left writing as they are', () => {
		expect(csvLine(['🧲 neck', 'ملف الجسر'])).toBe('🧲 neck,ملف الجسر\r\n');
	});

	it.each(['=cmd()', '+1', '-1', '@SUM(A1)', '\t=1', '\r=1', '\n=1', '＝1+1'])(
		'writes the text %j so that no spreadsheet runs it',
		(text) => {
			expect(read(csvLine([text]))).toEqual([[`'${text}`]]);
		}
	);

	it('finds a formula behind a NUL', () => {
		expect(csvLine(['\0=1'])).toBe("'=1\r\n");
	});

	it('leaves numbers numbers, the negative ones too, and nothing empty', () => {
		expect(csvLine([-1, 0, 5320, 448.5, null, ''])).toBe('-1,0,5320,448.5,,\r\n');
	});

	it('is read back as what was written, whatever the text', () => {
		const text = fc.string({ unit: 'binary' }).map((s) => s.replaceAll('\0', ''));
		fc.assert(
			fc.property(fc.array(fc.array(text, { minLength: 1, maxLength: 4 }), { minLength: 1, maxLength: 5 }), (rows) => {
				const back = read(rows.map((row) => csvLine(row)).join(''));
				expect(back.map((row) => row.map((cell) => cell.replace(/^'(?=[=+\-@\t\r\n＝＋－＠])/, '')))).toEqual(
					rows.map((row) => row.map((cell) => cell.replace(/^'(?=[=+\-@\t\r\n＝＋－＠])/, '')))
				);
			})
		);
	});

	it('never starts a text cell with what starts a formula', () => {
		fc.assert(
			fc.property(fc.string(), (text) => {
				expect(read(csvLine([text, 'end']))[0]?.[0] ?? '').not.toMatch(/^[=+\-@\t\r\n]/);
			})
		);
	});
});
