import { mkdir, open, readdir, readFile, rename, rm, statfs, type FileHandle } from 'node:fs/promises';
import { join } from 'node:path';
import { parseDeviceLine, type DeviceLine } from '../../src/lib/turnline/index.ts';
import { Boots, readMarks } from './boots.ts';
import { readRecords, writeRecord, type LineRecord } from './record.ts';

/**
 * Lines on disk until the server has them. Append only, in files that are removed whole; a line counts as kept once its
 * bytes are synced. What a crash tore at the end is cut off at the next start: it was never acknowledged.
 */

export interface SpooledLine {
	seq: number;
	at: number;
	text: string;
	line: DeviceLine;
}

export interface SpoolOptions {
	folder: string;
	/** The disk it may take. */
	bytesMax?: number;
	/** For a file that cannot be written or synced, in tests. */
	openFile?: typeof open;
}

export interface SpoolState {
	/** Lines not yet done with. */
	lines: number;
	bytes: number;
	bytesMax: number;
	/** 'full': what it may take, or what the disk has, holds events alone. 'failing': the disk refuses. */
	keeping: 'yes' | 'full' | 'failing';
	/** 'limit', 'disk' or the error of the system; null while it keeps. */
	reason: string | null;
	/** Ticks given up for room, since the start. */
	ticksDropped: number;
	/** Records found spoilt, since the start. */
	spoilt: number;
}

const bytesMaxDefault = 256 * 1024 * 1024;
/** Of files this size one is in memory at a time, and one is removed at a time. */
const segmentBytesMost = 256 * 1024;
/** A small spool has at least this many files, so that its oldest can go. */
const segmentsMin = 8;
/** Room left on the disk, in files: to write one anew without its ticks, and to begin the next. */
const spareSegments = 2;
/** Room for what comes with a batch: the head of a file, a mark of what is done. */
const extraBytes = 4_096;

interface Segment {
	/** Number of the first line it may hold; also its name. */
	first: number;
	file: string;
	bytes: number;
	lines: number;
	/** Ticks that may be given up for room. */
	ticks: number;
	/** The greatest number in it, or that before its first. */
	last: number;
}

export class Spool {
	readonly boots: Boots;
	readonly #folder: string;
	readonly #bytesMax: number;
	readonly #segmentBytes: number;
	readonly #openFile: typeof open;
	/** The oldest first; the last is written to. */
	#segments: Segment[] = [];
	#handle: FileHandle | null = null;
	#nextSeq = 1;
	#freedSeq = 1;
	#freedOnDisk = 1;
	#waiting: { lines: SpooledLine[]; kept: (kept: boolean) => void }[] = [];
	#writing: Promise<void> | null = null;
	#keeping: SpoolState['keeping'] = 'yes';
	#reason: string | null = null;
	#ticksDropped = 0;
	#spoilt = 0;
	/** The lines of the file being written, and of the one read last. */
	#tail: SpooledLine[] = [];
	#read: { first: number; lines: SpooledLine[] } | null = null;

	private constructor(options: SpoolOptions, boots: Boots) {
		this.#folder = options.folder;
		this.#bytesMax = options.bytesMax ?? bytesMaxDefault;
		this.#segmentBytes = Math.min(segmentBytesMost, Math.floor(this.#bytesMax / segmentsMin));
		this.#openFile = options.openFile ?? open;
		this.boots = boots;
	}

	/** Opens a spool, mends its end, and goes on where it was. Throws where the folder cannot be read. */
	static async open(options: SpoolOptions): Promise<Spool> {
		await mkdir(options.folder, { recursive: true, mode: 0o700 });
		const names = await readdir(options.folder);
		for (const name of names.filter((found) => found.endsWith('.new'))) await rm(join(options.folder, name));
		const files = names.filter((name) => /^\d{12}\.log$/.test(name)).sort();
		const found: { segment: Segment; records: ReturnType<typeof readRecords> }[] = [];
		for (const name of files) {
			const file = join(options.folder, name);
			const bytes = await readFile(file);
			const records = readRecords(bytes);
			const first = Number(name.slice(0, 12));
			found.push({ segment: { first, file, bytes: bytes.length, lines: 0, ticks: 0, last: first - 1 }, records });
		}
		const head = found.flatMap(({ records }) => records.records).find((record) => record.kind === 'boots');
		const spool = new Spool(options, new Boots(head?.kind === 'boots' ? readMarks(head.boots) : []));
		for (const { segment, records } of found) spool.#takeFound(segment, records);
		const last = found.at(-1);
		if (last) await spool.#reopen(last.segment, last.records.wholeBytes);
		return spool;
	}

	/** Number the next line will get. */
	get nextSeq(): number {
		return this.#nextSeq;
	}

	/** Everything before this is done with. */
	get freedSeq(): number {
		return this.#freedSeq;
	}

	state(): SpoolState {
		return {
			lines: this.#segments.reduce((sum, segment) => sum + this.#held(segment), 0),
			bytes: this.#bytes,
			bytesMax: this.#bytesMax,
			keeping: this.#keeping,
			reason: this.#keeping === 'yes' ? null : this.#reason,
			ticksDropped: this.#ticksDropped,
			spoilt: this.#spoilt
		};
	}

	/** Numbers lines as they come, before they are on disk. */
	number(lines: readonly { at: number; text: string; line: DeviceLine }[]): SpooledLine[] {
		return lines.map((line) => ({ ...line, seq: this.#nextSeq++ }));
	}

	/** Resolves once they are on disk, or could not be brought there: then they are forgotten and must not be acknowledged. */
	append(lines: SpooledLine[]): Promise<boolean> {
		return new Promise((kept) => {
			this.#waiting.push({ lines, kept });
			this.#writing ??= this.#writeAll();
		});
	}

	/** Everything before `seq` is done with: its disk is given back as far as whole files go. */
	async free(seq: number): Promise<void> {
		if (seq <= this.#freedSeq) return;
		this.#freedSeq = Math.min(seq, this.#nextSeq);
		await this.#removeDone();
	}

	async #removeDone(): Promise<void> {
		while (this.#segments.length > 1 && this.#segments[0]!.last < this.#freedSeq) {
			const [gone] = this.#segments.splice(0, 1);
			await rm(gone!.file, { force: true }).catch(() => {});
		}
	}

	/**
	 * Kept lines from `seq` on, at most `linesMax`, in order. `next`: where to read on; there may be fewer lines than numbers.
	 */
	async read(seq: number, linesMax: number): Promise<{ lines: SpooledLine[]; next: number }> {
		const lines: SpooledLine[] = [];
		let next = Math.max(seq, this.#freedSeq);
		for (const segment of [...this.#segments]) {
			if (segment.last < next) continue;
			for (const line of await this.#linesOf(segment)) {
				if (line.seq < next) continue;
				lines.push(line);
				next = line.seq + 1;
				if (lines.length >= linesMax) return { lines, next };
			}
			next = Math.max(next, segment.last + 1);
		}
		return { lines, next };
	}

	/** Notes what is done with, so that a restart sends little twice. Not synced: nothing is lost with it. */
	async note(): Promise<void> {
		if (this.#freedOnDisk === this.#freedSeq || !this.#handle) return;
		await this.append([]);
	}

	async close(): Promise<void> {
		await this.note();
		await this.#writing;
		await this.#handle?.close();
		this.#handle = null;
	}

	get #bytes(): number {
		return this.#segments.reduce((sum, segment) => sum + segment.bytes, 0);
	}

	/** How many lines of a file are not done with; of the one that is partly, an upper bound. */
	#held(segment: Segment): number {
		return segment.last < this.#freedSeq ? 0 : Math.min(segment.lines, segment.last - this.#freedSeq + 1);
	}

	#takeFound(segment: Segment, { records, spoilt }: ReturnType<typeof readRecords>): void {
		this.#segments.push(segment);
		this.#spoilt += spoilt;
		this.#tail = [];
		for (const record of records) {
			if (record.kind === 'line') {
				const line = this.#typed(record);
				if (!line) continue;
				this.#count(segment, line);
				this.boots.keep(line.line);
				this.#tail.push(line);
			} else if (record.kind === 'free') this.#freedSeq = this.#freedOnDisk = Math.max(this.#freedSeq, record.seq);
			this.#nextSeq = Math.max(this.#nextSeq, record.kind === 'line' ? record.seq + 1 : record.seq);
		}
		this.#nextSeq = Math.max(this.#nextSeq, segment.first);
	}

	#typed({ seq, at, text }: LineRecord): SpooledLine | null {
		const parsed = parseDeviceLine(text);
		return parsed.ok && parsed.line ? { seq, at, text, line: parsed.line } : null;
	}

	#count(segment: Segment, line: SpooledLine): void {
		segment.lines += 1;
		if (line.line.verb === 'T') segment.ticks += 1;
		segment.last = Math.max(segment.last, line.seq);
	}

	async #reopen(segment: Segment, wholeBytes: number): Promise<void> {
		this.#handle = await this.#openFile(segment.file, 'r+');
		if (segment.bytes !== wholeBytes) {
			await this.#handle.truncate(wholeBytes);
			await this.#handle.datasync();
			segment.bytes = wholeBytes;
		}
	}

	async #writeAll(): Promise<void> {
		// What else comes in this moment goes with it: one sync for all.
		await Promise.resolve();
		while (this.#waiting.length > 0) {
			const batch = this.#waiting.splice(0);
			const lines = batch.flatMap((part) => part.lines);
			const kept = await this.#write(lines);
			for (const part of batch) part.kept(kept);
		}
		this.#writing = null;
	}

	async #write(lines: SpooledLine[]): Promise<boolean> {
		let text = lines.map((line) => writeRecord({ kind: 'line', seq: line.seq, at: line.at, text: line.text })).join('');
		const freed = this.#freedSeq;
		if (freed > this.#freedOnDisk) text += writeRecord({ kind: 'free', seq: freed });
		try {
			if (lines.length > 0 && !(await this.#makeRoom(text.length))) {
				this.#keeping = 'full';
				return false;
			}
			const segment = await this.#segmentFor(text.length);
			const handle = this.#handle!;
			try {
				await writeFully(handle, Buffer.from(text, 'latin1'), segment.bytes);
				if (lines.length > 0) await handle.datasync();
			} catch (error) {
				// The start of it may be there: cut off, so that what follows stands on whole records.
				await handle.truncate(segment.bytes).catch(() => {});
				throw error;
			}
			segment.bytes += text.length;
			for (const line of lines) {
				this.#count(segment, line);
				this.boots.keep(line.line);
				this.#tail.push(line);
			}
			this.#freedOnDisk = freed;
			if (lines.length > 0) {
				this.#keeping = 'yes';
				this.#reason = null;
			}
			return true;
		} catch (error) {
			// A mark alone is no loss: a restart sends a little twice.
			if (lines.length === 0) return true;
			const { code, message } = error as NodeJS.ErrnoException;
			this.#keeping = code === 'ENOSPC' || code === 'EDQUOT' ? 'full' : 'failing';
			this.#reason = code ?? message;
			return false;
		}
	}

	/** The file to write to: the last one, or a new one when it is long enough. */
	async #segmentFor(bytes: number): Promise<Segment> {
		const last = this.#segments.at(-1);
		if (last && this.#handle && last.bytes + bytes <= this.#segmentBytes) return last;
		if (last && this.#handle && last.lines === 0 && last.last < last.first) return last;
		return this.#begin();
	}

	async #begin(): Promise<Segment> {
		const first = Math.max(this.#segments.at(-1)?.last ?? 0, this.#segments.at(-1)?.first ?? 0) + 1;
		const file = join(this.#folder, `${String(first).padStart(12, '0')}.log`);
		const head = writeRecord({ kind: 'boots', seq: first, boots: this.boots.marks });
		const mark = writeRecord({ kind: 'free', seq: this.#freedSeq });
		const bytes = Buffer.from(head + mark, 'latin1');
		const handle = await this.#openFile(file, 'w+', 0o600);
		try {
			await writeFully(handle, bytes, 0);
			await handle.datasync();
			await syncFolder(this.#folder);
		} catch (error) {
			await handle.close().catch(() => {});
			await rm(file, { force: true }).catch(() => {});
			throw error;
		}
		await this.#handle?.close().catch(() => {});
		this.#handle = handle;
		const segment: Segment = { first, file, bytes: bytes.length, lines: 0, ticks: 0, last: first - 1 };
		this.#segments.push(segment);
		this.#tail = [];
		await this.#removeDone();
		return segment;
	}

	/** Whether there is room for so many bytes, if need be after the oldest ticks have gone. Events never go. */
	async #makeRoom(bytes: number): Promise<boolean> {
		const wanted = bytes + extraBytes;
		for (;;) {
			if (wanted <= (await this.#room())) return true;
			const oldest = this.#segments.slice(0, -1).find((segment) => segment.ticks > 0 && this.#held(segment) > 0);
			if (oldest) {
				await this.#dropTicks(oldest);
				continue;
			}
			const last = this.#segments.at(-1);
			// The file being written is the only one left with ticks: closed, it can lose them as well.
			if (last && last.ticks > 1 && last.bytes > this.#segmentBytes / 4) {
				await this.#begin();
				continue;
			}
			return false;
		}
	}

	async #room(): Promise<number> {
		const own = this.#bytesMax - this.#bytes;
		const disk = await statfs(this.#folder);
		const free = disk.bavail * disk.bsize - spareSegments * this.#segmentBytes;
		// Which of the two it would be, should it come to that.
		this.#reason = own <= free ? 'limit' : 'disk';
		return Math.min(own, free);
	}

	/** Writes a file anew without its ticks, but for the last of each boot. */
	async #dropTicks(segment: Segment): Promise<void> {
		const bytes = await readFile(segment.file);
		const { records } = readRecords(bytes);
		const lastTick = new Map<string, number>();
		const typed = records.map((record) => ({ record, line: record.kind === 'line' ? this.#typed(record) : null }));
		for (const { line } of typed) if (line?.line.verb === 'T') lastTick.set(line.line.b, line.seq);
		const left = typed.filter(({ line }) => line?.line.verb !== 'T' || lastTick.get(line.line.b) === line.seq);
		const text = left.map(({ record }) => writeRecord(record)).join('');
		const handle = await this.#openFile(`${segment.file}.new`, 'w', 0o600);
		try {
			await writeFully(handle, Buffer.from(text, 'latin1'), 0);
			await handle.datasync();
		} catch (error) {
			await handle.close().catch(() => {});
			await rm(`${segment.file}.new`, { force: true });
			throw error;
		}
		await handle.close();
		await rename(`${segment.file}.new`, segment.file);
		await syncFolder(this.#folder);
		const dropped = typed.length - left.length;
		this.#ticksDropped += dropped;
		segment.lines -= dropped;
		segment.ticks = 0;
		segment.bytes = text.length;
		this.#read = null;
	}

	async #linesOf(segment: Segment): Promise<SpooledLine[]> {
		if (segment === this.#segments.at(-1)) return [...this.#tail];
		if (this.#read?.first !== segment.first) {
			const { records } = readRecords(await readFile(segment.file));
			const lines = records.flatMap((record) => (record.kind === 'line' ? (this.#typed(record) ?? []) : []));
			this.#read = { first: segment.first, lines };
		}
		return this.#read.lines;
	}
}

async function writeFully(handle: FileHandle, bytes: Buffer, position: number): Promise<void> {
	for (let done = 0; done < bytes.length;) {
		const { bytesWritten } = await handle.write(bytes, done, bytes.length - done, position + done);
		if (bytesWritten === 0) throw Object.assign(new Error('nothing was written'), { code: 'EIO' });
		done += bytesWritten;
	}
}

/** A new name is on disk once its folder is. */
async function syncFolder(folder: string): Promise<void> {
	const handle = await open(folder, 'r');
	try {
		await handle.sync();
	} finally {
		await handle.close();
	}
}
