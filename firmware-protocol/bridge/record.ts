import { crc32 } from 'node:zlib';

/**
 * One record of the spool as a line of text that a person can read, with a checksum of its own:
 *
 *   L 1042 1796133600123 T b=5C0E91A7 n=2 e=1 f=1 v=0 r=58 t=1040 ~C2D9 *0A1B2C3D
 *   F 1040 *…          everything before 1040 needs to be kept no longer
 *   B [{…}] *…         what was known of each boot when this file was begun
 */

export interface LineRecord {
	kind: 'line';
	/** Number of the line in this spool; each is greater than the one before. */
	seq: number;
	/** Unix ms at which it was received. */
	at: number;
	text: string;
}
export interface FreeRecord {
	kind: 'free';
	/** Everything before this is done with. */
	seq: number;
}
export interface BootsRecord {
	kind: 'boots';
	/** Of the next line: a spool that is empty goes on counting. */
	seq: number;
	boots: unknown;
}
export type Record = LineRecord | FreeRecord | BootsRecord;

/** With its LF. */
export function writeRecord(record: Record): string {
	const body =
		record.kind === 'line'
			? `L ${record.seq} ${record.at} ${record.text}`
			: record.kind === 'free'
				? `F ${record.seq}`
				: `B ${record.seq} ${JSON.stringify(record.boots)}`;
	return `${body} *${checksum(body)}\n`;
}

/** null: torn or spoilt. */
export function readRecord(text: string): Record | null {
	const end = text.length - 10;
	if (end < 1 || text.slice(end, end + 2) !== ' *') return null;
	const body = text.slice(0, end);
	if (text.slice(end + 2) !== checksum(body)) return null;
	const line = /^L (\d+) (\d+) ([ -~]*)$/.exec(body);
	if (line) return { kind: 'line', seq: Number(line[1]), at: Number(line[2]), text: line[3]! };
	const free = /^F (\d+)$/.exec(body);
	if (free) return { kind: 'free', seq: Number(free[1]) };
	const boots = /^B (\d+) (.*)$/.exec(body);
	if (!boots) return null;
	try {
		return { kind: 'boots', seq: Number(boots[1]), boots: JSON.parse(boots[2]!) };
	} catch {
		return null;
	}
}

/**
 * The records of a file. `wholeBytes`: up to where it is good at its end; what follows was torn by a crash or a full disk.
 * A spoilt record in the middle costs itself alone and is counted.
 */
export function readRecords(bytes: Buffer): { records: Record[]; wholeBytes: number; spoilt: number } {
	const records: Record[] = [];
	let wholeBytes = 0;
	let spoilt = 0;
	let spoiltSince = 0;
	for (let from = 0; from < bytes.length;) {
		const lf = bytes.indexOf(0x0a, from);
		if (lf < 0) break;
		const record = readRecord(bytes.toString('latin1', from, lf));
		from = lf + 1;
		if (record) {
			records.push(record);
			wholeBytes = from;
			// What is followed by a good one is not the torn end.
			spoilt += spoiltSince;
			spoiltSince = 0;
		} else spoiltSince += 1;
	}
	return { records, wholeBytes, spoilt };
}

function checksum(body: string): string {
	return crc32(Buffer.from(body, 'latin1')).toString(16).toUpperCase().padStart(8, '0');
}
