import { spawnSync } from 'node:child_process';
import { readFileSync, readdirSync, readlinkSync, realpathSync } from 'node:fs';
import { userInfo } from 'node:os';

/** Who has a port open, and why this program may not open it. */

export interface Holder {
	pid: number;
	/** The program's name as the system knows it. */
	name: string;
}

/** lsof walks over every file there is; a retry must not wait for it. */
const lsofMsMax = 3_000;

/**
 * Other processes that have a device open, by /proc, or by lsof where there is no /proc. Programs of other people are seen
 * by root alone: an empty answer does not mean that nobody has it.
 */
export function whoHolds(path: string): Holder[] {
	let real: string;
	try {
		real = realpathSync(path);
	} catch {
		return [];
	}
	let pids: string[];
	try {
		pids = readdirSync('/proc').filter((name) => /^\d+$/.test(name));
	} catch {
		return whoHoldsByLsof(real);
	}
	return pids
		.map(Number)
		.filter((pid) => pid !== process.pid && hasOpen(pid, real))
		.map((pid) => ({ pid, name: nameOf(pid) }));
}

function hasOpen(pid: number, real: string): boolean {
	const folder = `/proc/${pid}/fd`;
	try {
		return readdirSync(folder).some((fd) => {
			try {
				return readlinkSync(`${folder}/${fd}`) === real;
			} catch {
				return false;
			}
		});
	} catch {
		return false;
	}
}

function nameOf(pid: number): string {
	try {
		return readFileSync(`/proc/${pid}/comm`, 'utf8').trim();
	} catch {
		return '?';
	}
}

function whoHoldsByLsof(real: string): Holder[] {
	const ran = spawnSync('lsof', ['-F', 'pc', '--', real], { encoding: 'utf8', timeout: lsofMsMax });
	return readLsof(ran.stdout ?? '').filter(({ pid }) => pid !== process.pid);
}

/** The output of `lsof -F pc`: a line `p` and the process, then a line `c` and its name. */
export function readLsof(text: string): Holder[] {
	const found: Holder[] = [];
	for (const line of text.split('\n')) {
		if (line.startsWith('p')) found.push({ pid: Number(line.slice(1)), name: '?' });
		const last = found.at(-1);
		if (line.startsWith('c') && last) last.name = line.slice(1);
	}
	return found;
}

/** Who to end, in words. */
export function busyText(path: string, holders: readonly Holder[]): string {
	const who =
		holders.length > 0
			? `by ${holders.map(({ pid, name }) => `${name} (process ${pid})`).join(' and ')}`
			: 'by another program; run this as root once to see which';
	return `${path} is in use ${who}. One program can read a port: end that one. This one takes over by itself.`;
}

/** What a person without the right to a port has to do. `groupId`: the group the device belongs to. */
export function permissionText(path: string, groupId: number, groupFile = '/etc/group'): string {
	const user = userName();
	let rows: string[][] = [];
	try {
		rows = readFileSync(groupFile, 'utf8')
			.split('\n')
			.map((row) => row.split(':'));
	} catch {
		// A system without such a file: the number must do.
	}
	const row = rows.find(([, , id]) => id === String(groupId));
	const group = row?.[0] ?? `number ${groupId}`;
	const start = `${user} may not open ${path}: it belongs to the group ${group}`;
	if (group === 'root')
		return `${start}, which is no group for people. Have its device rule (udev) give it to dialout.`;
	return row?.[3]?.split(',').includes(user)
		? `${start}, and ${user} was added to it after this session began. Sign out and in again, or restart the service.`
		: `${start}, and ${user} is not in it. Run "sudo usermod -aG ${group} ${user}", then sign out and in again.`;
}

function userName(): string {
	try {
		return userInfo().username;
	} catch {
		return `user ${process.getuid?.() ?? '?'}`;
	}
}
