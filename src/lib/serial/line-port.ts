import { execFile } from 'node:child_process';
import { accessSync, constants, existsSync, realpathSync, statSync } from 'node:fs';
import { SerialPort } from 'serialport';
import { newSplitter, parseDeviceLine, serialBaud, type DeviceLine, type Parsed } from '../turnline/index.ts';
import { busyText, permissionText, whoHolds } from './holders.ts';
import { TextShare } from './text-share.ts';
import { boardOf, boardText, sameBoard, systemPlaces, usbPorts, type Board, type TtyPlaces } from './tty.ts';

/**
 * Reads a winder's lines from a serial port, and finds the port again when the cable was pulled, also under another name.
 *
 * What it does about the reset line: it opens the port once and never sets DTR or RTS itself. Linux raises both at every
 * opening, and lowers them at the last closing unless the port's "hang up on close" is off; it is switched off here, so that
 * closing and opening again shows the board no edge. The first opening after the board was plugged in does show one: a board
 * that resets on it resets then, once, and no program can keep Linux from it (a capacitor at its reset pin can). On other
 * systems the driver decides.
 */

/** How soon a port is looked for again. */
const againMs = 500;
/**
 * How often an open port is asked whether it is still there. A port that was pulled in the middle of a read answers that
 * nothing came, for ever, and is never reported as gone.
 */
const thereMs = 500;
/** A board that takes nothing must not fill the memory with what it is told. */
const unwrittenBytesMax = 4_096;
/** How long an error in the words of the system may be. */
const reasonCharsMax = 200;

export interface HeardLine {
	text: string;
	parsed: Parsed<DeviceLine>;
}

export type TroubleKind = 'missing' | 'permission' | 'busy' | 'other-board' | 'unreadable' | 'failed';
export interface Trouble {
	kind: TroubleKind;
	/** For a person: what is, and what to do. */
	text: string;
}

export interface LinePortEvents {
	/** Lines as they came, good or not. While a promise is waited for the port is not read; what overruns then is caught by the checksums. */
	lines(lines: HeardLine[], receivedAtMs: number): void | Promise<void>;
	opened?(path: string): void;
	/** The cable was pulled, or the board went away; it is looked for. */
	lost?(): void;
	/** Lines were dropped before they could be read. */
	dropped?(why: 'too-long' | 'not-ascii', lines: number, atMs: number): void;
	/** Each time it changes; null: all is well again. */
	trouble?(trouble: Trouble | null): void;
}

export interface LinePortState {
	/** As it was asked for. */
	path: string;
	/** Where it is open now; null: it is not. */
	openAs: string | null;
	board: Board | null;
	trouble: Trouble | null;
	/** Lines heard, those among them that were refused, and those dropped before they could be read. */
	lines: number;
	refused: number;
	tooLong: number;
	notAscii: number;
	/** How often it was opened. */
	opened: number;
}

export interface LinePort {
	/** Lines to the board, without LF. false: there is no board, or it does not take all of them now. */
	write(lines: readonly string[]): boolean;
	state(): LinePortState;
	/** Closes the port and looks for it no more. */
	close(): Promise<void>;
}

/** Opens a port, now or as soon as it is there, and keeps it open. */
export function openLinePort(path: string, events: LinePortEvents, places: TtyPlaces = systemPlaces): LinePort {
	let port: SerialPort | null = null;
	let openAs: string | null = null;
	let board: Board | null = null;
	let trouble: Trouble | null = null;
	let ended = false;
	let timer: NodeJS.Timeout | null = null;
	let opening: Promise<void> | null = null;
	const counts = { lines: 0, refused: 0, tooLong: 0, notAscii: 0, opened: 0 };

	const say = (next: Trouble | null) => {
		if (next?.kind === trouble?.kind && next?.text === trouble?.text) return;
		trouble = next;
		events.trouble?.(next);
	};

	const later = () => {
		if (ended) return;
		timer = setTimeout(() => {
			timer = null;
			opening = attempt();
		}, againMs);
	};

	/** The name the board has now, or why there is none. */
	const find = (): { path: string } | Trouble => {
		const there = existsSync(path);
		const now = there ? boardOf(path, places) : null;
		if (there && (board === null || (now !== null && sameBoard(now, board)))) return { path };
		if (board !== null) {
			const known = board;
			const same = usbPorts(places).filter((found) => sameBoard(found.board, known));
			// Several that cannot be told apart: only the name it had is sure.
			if (same.length === 1) return { path: same[0]!.path };
			if (there) {
				const what = now ? boardText(now) : 'no USB board';
				return {
					kind: 'other-board',
					text: `${path} is another board now (${what}), not the winder (${boardText(board)}), and is left alone. Plug the winder in again.`
				};
			}
		}
		return { kind: 'missing', text: missingText(path, places) };
	};

	const attempt = async (): Promise<void> => {
		const found = find();
		if ('kind' in found) {
			say(found);
			return later();
		}
		const refused = await open(found.path);
		if (refused && !ended) say(refused);
		if (refused) later();
	};

	const open = async (at: string): Promise<Trouble | null> => {
		try {
			accessSync(at, constants.R_OK | constants.W_OK);
		} catch (error) {
			return openTrouble(at, error as NodeJS.ErrnoException);
		}
		// A program that took no lock would share the bytes with this one, each getting half of them. The other end of a
		// pseudo-terminal may hold it and reads none.
		if (!/^\/dev\/pts\//.test(realpathSync(at))) {
			const holders = whoHolds(at);
			if (holders.length > 0) return { kind: 'busy', text: busyText(at, holders) };
		}
		const opened = new SerialPort({ path: at, baudRate: serialBaud, autoOpen: false, hupcl: false });
		const failed = await new Promise<Error | null>((resolve) => opened.open(resolve));
		if (failed) return openTrouble(at, failed);
		await leaveResetAlone(at);
		if (ended) {
			await closed(opened);
			return null;
		}
		if (!opened.isOpen) return { kind: 'missing', text: missingText(path, places) };
		listen(opened);
		watch(opened, at);
		port = opened;
		openAs = at;
		board = boardOf(at, places) ?? board;
		counts.opened += 1;
		say(null);
		events.opened?.(at);
		return null;
	};

	const listen = (opened: SerialPort) => {
		const splitter = newSplitter();
		const share = new TextShare();
		let first = true;
		let before = { tooLong: 0, notAscii: 0 };
		opened.on('data', (chunk: Buffer) => {
			const receivedAtMs = Date.now();
			share.push(chunk);
			const heard: HeardLine[] = [];
			for (const text of splitter.push(chunk)) {
				const parsed = parseDeviceLine(text);
				if (parsed.ok && parsed.line) share.goodLine();
				// A port is opened in the middle of a line.
				const noise = first && !parsed.ok;
				first = false;
				if (noise) continue;
				counts.lines += 1;
				if (!parsed.ok) counts.refused += 1;
				heard.push({ text, parsed });
			}
			const tooLong = splitter.dropped.tooLong - before.tooLong;
			const notAscii = splitter.dropped.notAscii - before.notAscii;
			before = { ...splitter.dropped };
			counts.tooLong += tooLong;
			counts.notAscii += notAscii;
			if (tooLong > 0) events.dropped?.('too-long', tooLong, receivedAtMs);
			if (notAscii > 0) events.dropped?.('not-ascii', notAscii, receivedAtMs);
			say(share.unreadable ? unreadable(path) : null);
			if (heard.length === 0) return;
			const taken = events.lines(heard, receivedAtMs);
			if (taken === undefined) return;
			opened.pause();
			void taken.finally(() => opened.resume());
		});
		opened.on('error', () => {
			if (opened.isOpen) opened.close(() => {});
		});
		opened.on('close', () => {
			if (port !== opened) return;
			port = null;
			openAs = null;
			if (ended) return;
			events.lost?.();
			later();
		});
	};

	/** Closes a port whose device is gone, or is another one of the same name. */
	const watch = (opened: SerialPort, at: string) => {
		const device = deviceAt(at);
		const asking = setInterval(() => {
			if (opened.isOpen && deviceAt(at) !== device) opened.close(() => {});
		}, thereMs);
		opened.on('close', () => clearInterval(asking));
	};

	opening = attempt();

	return {
		write(lines) {
			if (!port?.isOpen || port.writableLength > unwrittenBytesMax) return false;
			// A STOP that would have to wait is void: it might stop the next coil.
			const waits = port.writableLength > 0;
			const now = waits ? lines.filter((text) => !/^STOP\b/.test(text)) : lines;
			if (now.length > 0) port.write(`${now.join('\n')}\n`);
			return now.length === lines.length;
		},
		state: () => ({ path, openAs, board, trouble, ...counts }),
		async close() {
			ended = true;
			if (timer) clearTimeout(timer);
			await opening;
			const open = port;
			port = null;
			openAs = null;
			if (open) await closed(open);
		}
	};
}

function closed(port: SerialPort): Promise<void> {
	return new Promise((resolve) => {
		if (!port.isOpen) return resolve();
		port.close(() => resolve());
	});
}

/** What tells the device behind a name from any other; null: there is none. */
function deviceAt(path: string): string | null {
	const found = statSync(path, { throwIfNoEntry: false });
	return found ? `${found.dev} ${found.ino} ${found.rdev}` : null;
}

/** Switches "hang up on close" off. Where it cannot be done closing may reset the board, and all else works. */
function leaveResetAlone(path: string): Promise<void> {
	if (process.platform !== 'linux') return Promise.resolve();
	return new Promise((resolve) => execFile('stty', ['-F', path, '-hupcl'], () => resolve()));
}

function unreadable(path: string): Trouble {
	const speed = `${serialBaud} baud, 8 data bits, no parity, 1 stop bit`;
	return {
		kind: 'unreadable',
		text: `What comes over ${path} is mostly no text. Check the speed of the winder (${speed}), then the cable and its ground.`
	};
}

function missingText(path: string, places: TtyPlaces): string {
	const others = usbPorts(places).map((found) => `${found.path} (${boardText(found.board)})`);
	const there = others.length === 0 ? 'No USB serial port is there' : `There is ${others.join(', ')}`;
	return `${path} is not there. ${there}. Plug the winder in; it is looked for all the time.`;
}

/** What stood in the way of opening. serialport gives the system's words, not its code. */
export function openTrouble(path: string, error: Error & { code?: string }): Trouble {
	const says = error.message;
	if (error.code === 'ENOENT' || /No such (file|device)/i.test(says))
		return { kind: 'missing', text: `${path} is not there any more. It is looked for all the time.` };
	if (error.code === 'EACCES' || /Permission denied|Access denied/i.test(says)) {
		let group = 0;
		try {
			group = statSync(path).gid;
		} catch {
			// Gone meanwhile: the next attempt says so.
		}
		return { kind: 'permission', text: permissionText(path, group) };
	}
	if (/busy|cannot lock|temporarily unavailable/i.test(says))
		return { kind: 'busy', text: busyText(path, whoHolds(path)) };
	return { kind: 'failed', text: `${path} cannot be opened: ${says.slice(0, reasonCharsMax)}. It is tried again.` };
}
