import { execFileSync, spawn } from 'node:child_process';
import { join } from 'node:path';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import {
	whoHolds,
	openLinePort,
	type HeardLine,
	type LinePort,
	type LinePortEvents
} from '../../src/lib/serial/index.ts';
import { formatLine } from '../../src/lib/turnline/index.ts';
import { fakePorts, until, type FakePorts } from './pty.ts';

const tick = (n: number) => formatLine({ verb: 'T', b: '5C0E91A7', n, e: 0, f: n, v: 0, r: 60, t: 1000 * n });

let ports: FakePorts;
let open: LinePort[] = [];
let heard: HeardLine[] = [];
let said: string[] = [];

beforeEach(() => {
	ports = fakePorts();
	heard = [];
	said = [];
});

afterEach(async () => {
	await Promise.all(open.map((port) => port.close()));
	open = [];
	ports.remove();
});

function read(name: string, more: Partial<LinePortEvents> = {}): LinePort {
	const events: LinePortEvents = {
		lines: (lines) => void heard.push(...lines),
		trouble: (trouble) => void said.push(trouble?.kind ?? 'well'),
		...more
	};
	const port = openLinePort(join(ports.devFolder, name), events, ports);
	open.push(port);
	return port;
}

const good = () => heard.flatMap(({ text, parsed }) => (parsed.ok && parsed.line ? [text] : []));

describe('a serial port that is read line by line', () => {
	it('hands over each line once it is whole, in whatever pieces it comes', async () => {
		const cable = await ports.plug('ttyACM0', 'A1');
		const port = read('ttyACM0');
		await until(() => port.state().openAs !== null);
		const bytes = Buffer.from(`${tick(1)}\r\n${tick(2)}\n`);
		for (const byte of bytes) cable.send(Uint8Array.of(byte));
		await until(() => good().length === 2);
		expect(heard.map(({ text }) => text)).toEqual([`${tick(1)}\r`, tick(2)]);
	});

	it('drops what is too long or no ASCII, counts it, and goes on with the next line', async () => {
		const cable = await ports.plug('ttyACM0', 'A1');
		const port = read('ttyACM0');
		await until(() => port.state().openAs !== null);
		cable.send(`${tick(1)}\n`);
		cable.send(`${'T'.repeat(5_000)}\n`);
		cable.send(Buffer.from([0x54, 0x20, 0xff, 0x00, 0x0a]));
		cable.send(`${tick(2).replace('f=2', 'f=3')}\n${tick(3)}\n`);
		await until(() => good().length === 2);
		expect(good()).toEqual([tick(1), tick(3)]);
		expect(port.state()).toMatchObject({ lines: 3, refused: 1, tooLong: 1, notAscii: 1 });
	});

	it('takes the half line it was opened in the middle of for noise', async () => {
		const cable = await ports.plug('ttyACM0', 'A1');
		const port = read('ttyACM0');
		await until(() => port.state().openAs !== null);
		cable.send(`v=0 r=60 t=1000 ~0000\n${tick(2)}\n`);
		await until(() => good().length === 1);
		expect(port.state()).toMatchObject({ lines: 1, refused: 0 });
	});

	it('writes lines to the board, and says when there is none', async () => {
		const cable = await ports.plug('ttyACM0', 'A1');
		let got = '';
		cable.onBytes = (bytes) => void (got += bytes.toString());
		const port = read('ttyACM0');
		expect(port.write(['?'])).toBe(false);
		await until(() => port.state().openAs !== null);
		expect(port.write(['?', '# hello'])).toBe(true);
		await until(() => got === '?\n# hello\n');
	});

	it('finds the board again by its serial number under another name', async () => {
		const first = await ports.plug('ttyACM0', 'A1');
		const port = read('ttyACM0', { lost: () => void said.push('lost') });
		await until(() => port.state().openAs !== null);
		first.send(`${tick(1)}\n`);
		await until(() => good().length === 1);
		// Another board takes the name meanwhile.
		await first.pull();
		await until(() => said.includes('lost'));
		await ports.plug('ttyACM0', 'B2');
		await until(() => said.includes('other-board'));
		const again = await ports.plug('ttyACM3', 'A1');
		await until(() => port.state().openAs === join(ports.devFolder, 'ttyACM3'));
		again.send(`${tick(2)}\n`);
		await until(() => good().length === 2);
		expect(port.state()).toMatchObject({ opened: 2, trouble: null, board: { serialNumber: 'A1' } });
	});

	it('does not choose between two boards that cannot be told apart', async () => {
		const first = await ports.plug('ttyUSB0', null);
		const port = read('ttyUSB0');
		await until(() => port.state().openAs !== null);
		await ports.plug('ttyUSB1', null);
		const third = await ports.plug('ttyUSB2', null);
		await first.pull();
		await until(() => said.includes('missing'));
		expect(port.state().openAs).toBeNull();
		await third.pull();
		await until(() => port.state().openAs === join(ports.devFolder, 'ttyUSB1'));
	});

	it('waits for a port that is not there yet', async () => {
		const port = read('ttyACM0');
		await until(() => said.includes('missing'));
		expect(port.state().trouble?.text).toContain('ttyACM0 is not there. No USB serial port is there.');
		await ports.plug('ttyACM0', 'A1');
		await until(() => port.state().openAs !== null);
		expect(port.state().trouble).toBeNull();
	});

	it('says who holds a busy port, and takes over when it is free', async () => {
		const cable = await ports.plug('ttyACM0', 'A1');
		const other = spawn('flock', ['--exclusive', cable.device, 'sleep', '3600'], { stdio: 'ignore', detached: true });
		await until(() => whoHolds(cable.device).some(({ name }) => name === 'sleep'));
		const port = read('ttyACM0');
		await until(() => said.includes('busy'));
		expect(port.state().trouble?.text).toMatch(/is in use by .*sleep \(process \d+\)/);
		process.kill(-other.pid!, 'SIGKILL');
		await until(() => port.state().openAs !== null);
	});

	it('leaves the line that resets a board alone: no hanging up on close, no flow control', async () => {
		const cable = await ports.plug('ttyACM0', 'A1');
		execFileSync('stty', ['-F', cable.device, 'hupcl', 'crtscts']);
		const port = read('ttyACM0');
		await until(() => port.state().openAs !== null);
		const settings = execFileSync('stty', ['-F', cable.device, '-a']).toString();
		expect(settings).toContain('speed 115200 baud');
		expect(settings).toMatch(/ -hupcl\b/);
		expect(settings).toMatch(/ -crtscts\b/);
		await port.close();
		expect(execFileSync('stty', ['-F', cable.device, '-a']).toString()).toMatch(/ -hupcl\b/);
	});

	it('says to check the speed when what comes is no text, until a good line comes', async () => {
		const cable = await ports.plug('ttyACM0', 'A1');
		const port = read('ttyACM0');
		await until(() => port.state().openAs !== null);
		cable.send(Buffer.from(Array.from({ length: 600 }, (_, i) => 128 + ((i * 37) % 128))));
		await until(() => said.includes('unreadable'));
		expect(port.state().trouble?.text).toContain('115200 baud');
		cable.send(`\n${tick(1)}\n`);
		await until(() => good().length === 1);
		expect(port.state().trouble).toBeNull();
	});

	it('reads no further while lines are being taken', async () => {
		const cable = await ports.plug('ttyACM0', 'A1');
		let free = () => {};
		const batches: number[] = [];
		const port = read('ttyACM0', {
			lines: (lines) => {
				batches.push(lines.length);
				return new Promise<void>((resolve) => (free = resolve));
			}
		});
		await until(() => port.state().openAs !== null);
		cable.send(`${tick(1)}\n`);
		await until(() => batches.length === 1);
		for (let n = 2; n <= 10; n += 1) cable.send(`${tick(n)}\n`);
		const before = port.state().lines;
		free();
		await until(() => {
			free();
			return port.state().lines === 10;
		});
		expect(before).toBe(1);
	});
});
