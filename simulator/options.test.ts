import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { readCommand } from './options.ts';
import { scenarioNames } from './scenarios.ts';

const folder = mkdtempSync(join(tmpdir(), 'turnstead-options-'));
afterAll(() => rmSync(folder, { recursive: true }));

const file = (name: string, text: string) => {
	const path = join(folder, name);
	writeFileSync(path, text);
	return path;
};
const key = 'k'.repeat(43);

function simulationOf(args: string[], linkKey: string | undefined = key) {
	const read = readCommand(args, linkKey);
	if (!read.ok || 'help' in read) throw new Error(JSON.stringify(read));
	return read.command.simulation;
}

function saysOf(args: string[], linkKey: string | undefined = key): string {
	const read = readCommand(args, linkKey);
	return read.ok ? '' : read.says;
}

describe('the simulator is told', () => {
	it('a winder whose key is in the environment, and winds the workshop over a WebSocket', () => {
		expect(simulationOf(['--winder', 'w1'])).toMatchObject({
			server: 'http://127.0.0.1:4173',
			winders: [{ winder: 'w1', linkKey: key }],
			scenario: 'workshop',
			carrier: 'ws',
			speedUp: 1,
			seed: 1
		});
		expect(simulationOf(['--winder', 'w1'])).not.toHaveProperty('coils');
	});

	it('keys in files, several winders, and winders in one file', () => {
		const one = file('one.key', `${key}\n`);
		expect(simulationOf(['--winder', 'w1', '--key-file', one], '').winders).toEqual([{ winder: 'w1', linkKey: key }]);
		expect(simulationOf(['--winder', `w1:${one}`, '--winder', `w2:${one}`], '').winders).toHaveLength(2);
		const list = file('list.json', JSON.stringify([{ winder: 'w3', linkKey: key, name: 'w-03' }]));
		expect(simulationOf(['--winders', list], '').winders).toEqual([{ winder: 'w3', linkKey: key, name: 'w-03' }]);
	});

	it('faults, outages and the kind of winder', () => {
		const args = '--winder w1 --drop 0.05 --double 0.1 --delay 200 --outage 20:15 --outage 60:5 --one-sensor --retain';
		expect(simulationOf([...args.split(' '), '--look-seconds', '5', '--coils', '3'])).toMatchObject({
			faults: {
				drop: 0.05,
				double: 0.1,
				delayMs: 200,
				outages: [
					{ fromS: 20, forS: 15 },
					{ fromS: 60, forS: 5 }
				]
			},
			device: { seesDirection: false, retains: true },
			maker: { lookMs: [4000, 6000] },
			coils: 3
		});
	});

	it.each([
		[[], 'Which winder'],
		[['--winder', 'w1', '--speed-up', '0'], '--speed-up is 1 to 500, not 0'],
		[['--winder', 'w1', '--drop', '5'], '--drop is 0 to 1, not 5'],
		[['--winder', 'w1', '--drop', ''], '--drop is 0 to 1'],
		[['--winder', 'w1', '--coils', '1.5'], '--coils is a whole number, not 1.5'],
		[['--winder', 'w1', '--outage', '20'], '--outage wants <from>:<for>'],
		[['--winder', 'w1', '--scenario', 'storm'], '--scenario is one of workshop, first-coil'],
		[['--winder', 'w1', '--server', 'here'], '--server wants an address'],
		[['--winder', 'w1', '--server', 'ftp://127.0.0.1'], '--server begins with http:// or https://'],
		[['--winder', 'w1', '--insecure-tls', '--server', 'https://shop.example'], 'only for a server on this machine'],
		[['--winder', 'w1', '--key-file', '/nonexistent'], 'cannot be read: ENOENT'],
		[['--winder', 'w1', '--name', 'two words'], 'without spaces'],
		[['--winder', 'w1', '--sped-up', '3'], '--sped-up']
	])('%j, and says what was meant', (args, says) => {
		const said = saysOf(args);
		expect(said === '' ? 'understood' : said).toContain(says.replace('only for', 'is for'));
	});

	it('no winder without its key', () => {
		expect(saysOf(['--winder', 'w1'], '')).toContain('TURNSTEAD_LINK_KEY');
	});

	it('to help, and names every scenario', () => {
		const read = readCommand(['--help'], undefined);
		expect(read.ok && 'help' in read).toBe(true);
		for (const name of scenarioNames) expect(read.ok && 'help' in read && read.help).toContain(name);
	});
});
