import { spawn, type ChildProcess } from 'node:child_process';
import {
	existsSync,
	mkdtempSync,
	readlinkSync,
	rmSync,
	symlinkSync,
	unlinkSync,
	writeFileSync,
	mkdirSync
} from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import type { TtyPlaces } from '../../src/lib/serial/index.ts';

/** A cable without a board: what is sent here comes out of a pseudo-terminal, and the other way round. */
export interface Cable {
	/** The pseudo-terminal itself, /dev/pts/…; another one at each plugging in. */
	readonly device: string;
	send(bytes: string | Uint8Array): void;
	/** What a program at the port wrote, in pieces as it comes. */
	onBytes: (bytes: Buffer) => void;
	/** Pulls it out: the pseudo-terminal is gone when this resolves. */
	pull(): Promise<void>;
}

/** Plugs a cable in; `link` is made to lead to its pseudo-terminal. */
export async function plugIn(link: string): Promise<Cable> {
	// It holds the pseudo-terminal itself, so that a program that is killed does not pull the cable.
	const socat: ChildProcess = spawn('socat', [`PTY,raw,echo=0,link=${link}.new`, 'STDIO'], {
		stdio: ['pipe', 'pipe', 'inherit']
	});
	const exited = new Promise<void>((resolve) => socat.once('exit', () => resolve()));
	await until(() => existsSync(`${link}.new`) || socat.exitCode !== null);
	if (socat.exitCode !== null) throw new Error(`socat ended with ${socat.exitCode}`);
	const device = readlinkSync(`${link}.new`);
	unlinkSync(`${link}.new`);
	rmSync(link, { force: true });
	symlinkSync(device, link);
	// What is written while it is being pulled goes nowhere.
	socat.stdin!.on('error', () => {});
	const cable: Cable = {
		device,
		send: (bytes) => void socat.stdin!.write(bytes),
		onBytes: () => {},
		async pull() {
			rmSync(link, { force: true });
			socat.kill('SIGKILL');
			await exited;
		}
	};
	socat.stdout!.on('data', (bytes: Buffer) => cable.onBytes(bytes));
	return cable;
}

/** A folder of devices and what the system tells of them, for boards that are not there. */
export interface FakePorts extends TtyPlaces {
	folder: string;
	/** A board with this serial number is plugged in under this name (`ttyACM0`). */
	plug(name: string, serialNumber: string | null): Promise<Cable>;
	remove(): void;
}

export function fakePorts(): FakePorts {
	const folder = mkdtempSync(join(tmpdir(), 'turnstead-ports-'));
	const sysFolder = join(folder, 'sys');
	const devFolder = join(folder, 'dev');
	mkdirSync(sysFolder);
	mkdirSync(devFolder);
	return {
		folder,
		sysFolder,
		devFolder,
		async plug(name, serialNumber) {
			// As in /sys: the port's folder, a link to its interface, and the board above that.
			const board = join(folder, `board-${name}`);
			rmSync(board, { recursive: true, force: true });
			mkdirSync(join(board, 'interface'), { recursive: true });
			writeFileSync(join(board, 'interface', 'bInterfaceNumber'), '00\n');
			writeFileSync(join(board, 'idVendor'), '1209\n');
			writeFileSync(join(board, 'idProduct'), '0001\n');
			if (serialNumber !== null) writeFileSync(join(board, 'serial'), `${serialNumber}\n`);
			const port = join(sysFolder, name);
			rmSync(port, { recursive: true, force: true });
			mkdirSync(port);
			symlinkSync(join(board, 'interface'), join(port, 'device'));
			const cable = await plugIn(join(devFolder, name));
			const { pull } = cable;
			cable.pull = async () => {
				rmSync(port, { recursive: true, force: true });
				await pull();
			};
			return cable;
		},
		remove: () => rmSync(folder, { recursive: true, force: true })
	};
}

/** Waits for what another process does. The limit is the test's own. */
export async function until(done: () => boolean | Promise<boolean>): Promise<void> {
	while (!(await done())) await new Promise((resolve) => setTimeout(resolve, 10));
}
