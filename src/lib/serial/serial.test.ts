import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir, userInfo } from 'node:os';
import { join } from 'node:path';
import fc from 'fast-check';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { busyText, permissionText, readLsof } from './holders.ts';
import { openTrouble } from './line-port.ts';
import { TextShare } from './text-share.ts';

describe('why a port does not open', () => {
	let folder: string;
	let groups: string;
	beforeEach(() => {
		folder = mkdtempSync(join(tmpdir(), 'turnstead-groups-'));
		groups = join(folder, 'group');
	});
	afterEach(() => rmSync(folder, { recursive: true }));

	it('names the group that is missing and how to join it', () => {
		writeFileSync(groups, 'root:x:0:\ndialout:x:20:someone\n');
		expect(permissionText('/dev/ttyACM0', 20, groups)).toContain(`sudo usermod -aG dialout ${userInfo().username}`);
	});

	it('says to sign in again where the group was joined in this session', () => {
		writeFileSync(groups, `dialout:x:20:someone,${userInfo().username}\n`);
		expect(permissionText('/dev/ttyACM0', 20, groups)).toContain('Sign out and in again');
	});

	it('sends nobody into the group root', () => {
		writeFileSync(groups, 'root:x:0:\n');
		expect(permissionText('/dev/ttyACM0', 0, groups)).not.toContain('usermod');
	});

	it('names a group by its number where nothing else is known', () => {
		expect(permissionText('/dev/ttyACM0', 20, join(folder, 'none'))).toContain('the group number 20');
	});

	it('names each program that holds it', () => {
		const holders = [
			{ pid: 7, name: 'monitor' },
			{ pid: 9, name: 'node' }
		];
		expect(busyText('/dev/ttyACM0', holders)).toContain('by monitor (process 7) and node (process 9).');
		expect(busyText('/dev/ttyACM0', [])).toContain('another program');
	});

	it('reads what lsof prints', () => {
		expect(readLsof('p7\ncmonitor\nf3\np9\ncnode\nf4\n')).toEqual([
			{ pid: 7, name: 'monitor' },
			{ pid: 9, name: 'node' }
		]);
	});

	it('tells the words of the system apart', () => {
		const kind = (says: string) => openTrouble('/nowhere/ttyACM0', new Error(says)).kind;
		expect(kind('Error: No such file or directory, cannot open /dev/ttyACM0')).toBe('missing');
		expect(kind('Error: Permission denied, cannot open /dev/ttyACM0')).toBe('permission');
		expect(kind('Error: Device or resource busy, cannot open /dev/ttyACM0')).toBe('busy');
		expect(kind('Error Resource temporarily unavailable Cannot lock port')).toBe('busy');
		expect(kind('Error: Input/output error, cannot open /dev/ttyACM0')).toBe('failed');
	});
});

describe('whether bytes are text', () => {
	const line = Buffer.from('T b=5C0E91A7 n=2 e=1 f=1 v=0 r=58 t=1040 ~C2D9\r\n');

	it('lines are, whatever they hold', () => {
		const share = new TextShare();
		for (let i = 0; i < 1_000; i += 1) share.push(line);
		expect(share.unreadable).toBe(false);
	});

	it('bytes of every value are not', () => {
		fc.assert(
			fc.property(fc.uint8Array({ minLength: 1_024, maxLength: 4_096 }), (bytes) => {
				// Chance bytes: of 256 values 97 are text.
				const odd = [...bytes].filter((byte) => !((byte >= 0x20 && byte <= 0x7e) || byte === 10 || byte === 13)).length;
				fc.pre(odd > bytes.length * 0.3);
				const share = new TextShare();
				share.push(bytes);
				return share.unreadable;
			})
		);
	});

	it('a short burst of noise between lines says nothing', () => {
		const share = new TextShare();
		for (let i = 0; i < 20; i += 1) {
			share.push(line);
			share.goodLine();
			share.push(Uint8Array.from({ length: 100 }, () => 0xff));
		}
		expect(share.unreadable).toBe(false);
	});
});
