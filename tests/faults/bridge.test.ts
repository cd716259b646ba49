import { execFileSync } from 'node:child_process';
import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, afterEach, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { throwawayCluster } from '../../src/commands/cluster.ts';
import { ensureBuilt } from '../../src/commands/build.ts';
import { testEnv } from '../../src/lib/server/env.ts';
import { between, randomFrom, wholeBetween, type Random } from '../../simulator/random.ts';
import { startSimulation, type Simulation } from '../../simulator/run.ts';
import { makeTemplate } from '../db/harness.ts';
import { startServer, type TestServer, type TestWinder } from '../e2e/server.ts';
import { openCableCarrier, type CableCarrier } from '../serial/cable-carrier.ts';
import { until } from '../serial/pty.ts';
import { bridgeProcess, type BridgeProcess } from './bridge-process.ts';
import { winderRows } from './rows.ts';
import { expectTruth } from './truth.ts';

/**
 * A winder on a cable, the bridge and the server, each killed or unplugged at seeded moments. Afterwards the rows must hold
 * each event once, and the totals of the truth log.
 */
const rounds = testEnv().soak ? 20 : 3;
const firstSeed = 20_261_204;
const speedUp = 20;
const roundMsMax = 240_000;

let cluster: Awaited<ReturnType<typeof throwawayCluster>>;
let template: string;
let folder: string;
let server: TestServer;
let winder: TestWinder;
let cable: CableCarrier | null;
let bridge: BridgeProcess | null;

beforeAll(async () => {
	await ensureBuilt();
	cluster = await throwawayCluster();
	template = await makeTemplate(cluster.url);
}, 300_000);

afterAll(async () => {
	await cluster?.remove();
});

beforeEach(async () => {
	folder = mkdtempSync(join(tmpdir(), 'turnstead-bridge-'));
	cable = null;
	bridge = null;
	server = await startServer({ cluster: { url: cluster.url, template } });
	winder = await server.addWinder({ timeScale: speedUp });
	await server.addCoil({ name: 'Coil over the cable', target: 900 });
});

afterEach(async () => {
	await bridge?.kill();
	await cable?.remove();
	await server.remove();
	rmSync(folder, { recursive: true, force: true });
});

/** A disk of two megabytes; only root, on a machine that lets it, has one to give. */
function mountSmallDisk(on: string): boolean {
	mkdirSync(on, { recursive: true });
	try {
		execFileSync('mount', ['-t', 'tmpfs', '-o', 'size=2m', 'tmpfs', on], { stdio: 'ignore' });
		return true;
	} catch {
		return false;
	}
}
const unmount = (disk: string) => execFileSync('umount', ['--lazy', disk]);

function canMount(): boolean {
	const tried = mkdtempSync(join(tmpdir(), 'turnstead-mount-'));
	const mounted = mountSmallDisk(tried);
	if (mounted) unmount(tried);
	rmSync(tried, { recursive: true });
	return mounted;
}

const pause = (ms: number) => new Promise((resolve) => setTimeout(resolve, ms));
const port = () => join(folder, 'winder');

function newBridge(carrier: 'ws' | 'http', more: string[] = []): BridgeProcess {
	const spool = join(folder, 'spool');
	const args = ['--port', port(), '--server', server.url, '--winder', winder.id, '--carrier', carrier];
	return bridgeProcess([...args, '--spool', spool, ...more], winder.linkKey);
}

function wind(seed: number, faults = { drop: 0.02, double: 0.03, corrupt: 0.03 }): Simulation {
	return startSimulation({
		server: server.url,
		winders: [{ winder: winder.id, linkKey: winder.linkKey, name: winder.name }],
		openCarrier: (_target, events) => (cable = openCableCarrier(port(), events)),
		speedUp,
		seed,
		coils: 1,
		faults,
		settleMsMax: 120_000
	});
}

/** Everything the winder said has come through: the bridge has nothing left, and the server all of it. */
async function caughtUp(): Promise<void> {
	await until(async () => {
		const state = await bridge!.state();
		return state !== null && state.server.linked && state.server.behind === 0 && state.spool.lines === 0;
	});
}

/** One thing after another goes wrong, until told to stop. */
async function mischief(random: Random, seed: number, ended: () => boolean): Promise<string[]> {
	const done: string[] = [];
	const acts = ['bridge', 'cable', 'server', 'noise', 'bridge', 'cable', 'server'];
	for (let i = seed % acts.length; done.length < 8 && !ended(); i += 1) {
		await pause(between(random, 400, 1_800));
		if (ended()) break;
		const act = acts[i % acts.length]!;
		if (act === 'bridge') {
			await bridge!.kill();
			await pause(between(random, 0, 1_500));
			await bridge!.start();
		} else if (act === 'cable') {
			await cable!.unplug();
			await pause(between(random, 0, 1_000));
			await cable!.replug();
		} else if (act === 'server') {
			await server.kill();
			await pause(between(random, 200, 2_500));
			await server.start();
		} else cable!.noise(Uint8Array.from({ length: 300 }, () => wholeBetween(random, 0, 255)));
		done.push(act);
	}
	return done;
}

describe('a bridge between a cable and the server', () => {
	it.each(Array.from({ length: rounds }, (_, i) => firstSeed + i))(
		'round %i loses no event and no turn, whoever is killed',
		async (seed) => {
			bridge = newBridge(seed % 2 === 0 ? 'ws' : 'http');
			const simulation = wind(seed);
			await bridge.start();
			let ended = false;
			const going = mischief(randomFrom(seed, 'mischief'), seed, () => ended);
			const result = await simulation.done;
			ended = true;
			const done = await going;
			expect(done, 'something went wrong while it wound').not.toEqual([]);
			await caughtUp();
			expect(await bridge.stop()).toBe(0);
			await expectTruth(server, winder, result.winders[0]!);
		},
		roundMsMax
	);

	it.each(['ws', 'http'] as const)(
		'keeps a coil that was wound while the server was away, and brings it over %s',
		async (carrier) => {
			bridge = newBridge(carrier);
			const simulation = wind(firstSeed);
			await bridge.start();
			// The plan has come down to the winder.
			await until(() => simulation.winders[0]!.device.plan !== null);
			await server.kill();
			const result = await simulation.done;
			expect(result.allAcknowledged, 'acknowledged by the bridge alone').toBe(true);
			await bridge.kill();
			await bridge.start();
			await server.start();
			await caughtUp();
			await expectTruth(server, winder, result.winders[0]!);
		},
		roundMsMax
	);

	// The unit tests of the spool have a disk that refuses in its place.
	if (!canMount()) console.warn('No small disk can be mounted here: the round on a full disk is not run.');
	else
		it(
			'on a full disk acknowledges nothing it could lose, and goes on when there is room',
			async () => {
				const disk = join(folder, 'disk');
				expect(mountSmallDisk(disk)).toBe(true);
				try {
					bridge = newBridge('ws', ['--spool', join(disk, 'spool'), '--spool-max', '1']);
					const simulation = wind(firstSeed + 1);
					await bridge.start();
					const { device } = simulation.winders[0]!;
					await until(() => device.plan !== null);
					await server.kill();
					// Another program fills the disk.
					writeFileSync(join(disk, 'other'), Buffer.alloc(1_900 * 1024));
					await until(() => bridge!.output().includes('The disk is full.'));
					const before = device.lastEvent;
					await until(() => device.lastEvent >= before + 3);
					expect(device.ring.events.length, 'the winder keeps them').toBeGreaterThanOrEqual(3);
					rmSync(join(disk, 'other'));
					await until(() => bridge!.output().includes('The spool takes lines again.'));
					await server.start();
					const result = await simulation.done;
					await caughtUp();
					expect(await bridge.stop()).toBe(0);
					bridge = null;
					await expectTruth(server, winder, result.winders[0]!);
				} finally {
					await bridge?.kill();
					unmount(disk);
				}
			},
			roundMsMax
		);

	it('is one to a spool: a second is told which process has it', async () => {
		bridge = newBridge('ws');
		await bridge.start();
		const second = newBridge('ws');
		await expect(second.start()).rejects.toThrow(/Another bridge \(process \d+\)/);
		await bridge.kill();
		// What a killed one left holds nobody up.
		await second.start();
		expect(await second.stop()).toBe(0);
	});

	it('is one to a port: a second with another spool waits, and says who reads it', async () => {
		const carrier = openCableCarrier(port(), { up() {}, down() {}, heard() {}, trouble() {} });
		cable = carrier;
		bridge = newBridge('ws');
		await bridge.start();
		await until(async () => (await bridge!.state())?.port.openAs !== null);
		const second = newBridge('ws', ['--spool', join(folder, 'other')]);
		try {
			await second.start();
			await until(() => second.output().includes('is in use by'));
			expect(second.output()).toMatch(/node \(process \d+\)/);
		} finally {
			await second.kill();
		}
	});

	it('keeps lines when its link key is not taken, and says what to do', async () => {
		const simulation = wind(firstSeed + 2, { drop: 0, double: 0, corrupt: 0 });
		bridge = bridgeProcess(
			['--port', port(), '--server', server.url, '--winder', winder.id, '--spool', join(folder, 'spool')],
			'not-the-key-of-any-winder'
		);
		await bridge.start();
		await until(() => bridge!.output().includes('does not take this link key (401)'));
		await until(async () => ((await bridge!.state())?.spool.lines ?? 0) > 0);
		expect(await bridge.stop()).toBe(0);
		// With the right key it goes on with the same spool.
		bridge = newBridge('ws');
		await bridge.start();
		await caughtUp();
		const rows = await winderRows(server, winder);
		expect(rows.boots.map((row) => row.boot)).toEqual([simulation.winders[0]!.device.boot]);
		await simulation.stop();
	});
});
