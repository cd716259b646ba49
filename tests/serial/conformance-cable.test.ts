import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, beforeEach, expect, it } from 'vitest';
import { NoWinder, type Heard } from '../../firmware-protocol/conformance/carrier.ts';
import { openSerial } from '../../firmware-protocol/conformance/carrier-serial.ts';
import { plugIn } from './pty.ts';

let folder: string;
beforeEach(() => (folder = mkdtempSync(join(tmpdir(), 'turnstead-conformance-'))));
afterEach(() => rmSync(folder, { recursive: true }));

const tick = 'T b=5C0E91A7 n=2 e=1 f=1 v=0 r=58 t=1040 ~C2D9';

it('a cable is waited for, a person is told, and its session ends when it is pulled', async () => {
	const link = join(folder, 'ttyACM0');
	const told: string[] = [];
	let missed = () => {};
	const missing = new Promise<void>((resolve) => (missed = resolve));
	const opening = openSerial(link, (text) => {
		told.push(text);
		missed();
	});
	await missing;
	expect(told[0]).toContain(`${link} is not there.`);
	const cable = await plugIn(link);
	const carrier = await opening;
	try {
		const asked = new Promise<string>((resolve) => (cable.onBytes = (bytes) => resolve(bytes.toString('latin1'))));
		carrier.send(['?', 'TIME u=1 ~0000']);
		expect(await asked).toBe('?\nTIME u=1 ~0000\n');
		cable.send(`noise\n${tick}\n${'x'.repeat(200)}\n`);
		const heard: Heard[] = [];
		while (heard.length < 3) {
			await carrier.pass(1_000);
			heard.push(...carrier.take());
		}
		// A dropped line is told apart from those that were read, before or behind them.
		expect(heard.slice(0, 1).map(({ from }) => from)).toEqual(['cable']);
		expect(
			heard
				.slice(1)
				.map(({ dropped, text }) => dropped ?? text)
				.sort()
		).toEqual([tick, 'too-long']);
		await cable.pull();
		while (carrier.gone() === null) await carrier.pass(1_000);
		expect(carrier.gone()).toBe('the cable was pulled, or the board went away');
	} finally {
		await carrier.close();
	}
});

it('a port that never opens is no session', async () => {
	await expect(openSerial(join(folder, 'ttyACM0'), () => {}, 1)).rejects.toThrow(NoWinder);
});
