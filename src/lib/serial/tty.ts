import { existsSync, readFileSync, readdirSync, realpathSync } from 'node:fs';
import { basename, dirname, join } from 'node:path';

/** Which board stands behind a serial port, as Linux tells it in /sys. Elsewhere nothing is known, and a port is its name. */

/** Where the system shows its ports; another place only in tests. */
export interface TtyPlaces {
	/** One folder a port, with a link `device` to what it is plugged into. */
	sysFolder: string;
	devFolder: string;
}

export const systemPlaces: TtyPlaces = { sysFolder: '/sys/class/tty', devFolder: '/dev' };

/** What tells one board from another, whatever name its port has. */
export interface Board {
	/** The number its maker gave it; null where it has none. */
	serialNumber: string | null;
	/** USB vendor and product, four hex digits each. */
	vendor: string;
	product: string;
	/** Which port of the board, where it has several. */
	interfaceNumber: string;
}

/** From the interface up to the device itself there are two or three folders; more would be the hub. */
const foldersUpMax = 4;

/** null: no USB board (a pseudo-terminal, a port of the mainboard), or not there. */
export function boardOf(path: string, places: TtyPlaces = systemPlaces): Board | null {
	const name = ttyName(path, places);
	if (name === null) return null;
	let folder: string;
	try {
		folder = realpathSync(join(places.sysFolder, name, 'device'));
	} catch {
		return null;
	}
	let interfaceNumber = '00';
	for (let up = 0; up < foldersUpMax; up += 1, folder = dirname(folder)) {
		interfaceNumber = word(join(folder, 'bInterfaceNumber')) ?? interfaceNumber;
		const vendor = word(join(folder, 'idVendor'));
		if (vendor === null) continue;
		const product = word(join(folder, 'idProduct')) ?? '';
		return { serialNumber: word(join(folder, 'serial')), vendor, product, interfaceNumber };
	}
	return null;
}

/** The ports with a USB board behind them, by name. */
export function usbPorts(places: TtyPlaces = systemPlaces): { path: string; board: Board }[] {
	let names: string[];
	try {
		names = readdirSync(places.sysFolder).sort();
	} catch {
		return [];
	}
	return names.flatMap((name) => {
		const path = join(places.devFolder, name);
		const board = existsSync(path) ? boardOf(path, places) : null;
		return board ? [{ path, board }] : [];
	});
}

/**
 * Whether two boards are the same one. Without a serial number all of one kind look alike: then the answer is "the same
 * kind", and whoever asks must know that there is only one.
 */
export function sameBoard(one: Board, other: Board): boolean {
	return (
		one.serialNumber === other.serialNumber &&
		one.vendor === other.vendor &&
		one.product === other.product &&
		one.interfaceNumber === other.interfaceNumber
	);
}

/** In words, for a person who looks at several. */
export function boardText({ serialNumber, vendor, product }: Board): string {
	return serialNumber === null ? `USB ${vendor}:${product} without a serial number` : `serial number ${serialNumber}`;
}

/** The name of a port without its folder, links followed as far as they stay among the devices. */
function ttyName(path: string, places: TtyPlaces): string | null {
	// In /dev the name itself tells; a link such as /dev/serial/by-id/… leads to it.
	if (dirname(path) === places.devFolder && existsSync(join(places.sysFolder, basename(path)))) return basename(path);
	try {
		return basename(realpathSync(path));
	} catch {
		return null;
	}
}

function word(file: string): string | null {
	try {
		return readFileSync(file, 'utf8').trim() || null;
	} catch {
		return null;
	}
}
