import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { throwawayCluster } from '../../src/commands/cluster.ts';
import { ensureBuilt } from '../../src/commands/build.ts';
import { testEnv } from '../../src/lib/server/env.ts';
import { between, randomFrom, wholeBetween } from '../../simulator/random.ts';
import { startSimulation } from '../../simulator/run.ts';
import { makeTemplate } from '../db/harness.ts';
import { startServer, type TestServer } from '../e2e/server.ts';
import { openCableCarrier, type CableCarrier } from '../serial/cable-carrier.ts';
import { until } from '../serial/pty.ts';
import { expectTruth } from './truth.ts';

/** A winder on a cable to the server itself, which is killed, unplugged and disturbed at seeded moments. */
const rounds = testEnv().soak ? 20 : 3;
const firstSeed = 20_261_207;
const speedUp = 20;
const roundMsMax = 240_000;

let cluster: Awaited<ReturnType<typeof throwawayCluster>>;
let template: string;

beforeAll(async () => {
	await ensureBuilt();
	cluster = await throwawayCluster();
	template = await makeTemplate(cluster.url);
}, 300_000);

afterAll(async () => {
	await cluster?.remove();
});

const pause = (ms: number) => new Promise((resolve) => setTimeout(resolve, ms));

async function mischief(
	server: TestServer,
	cable: CableCarrier,
	seed: number,
	ended: () => boolean
): Promise<string[]> {
	const random = randomFrom(seed, 'mischief');
	const acts = ['cable', 'noise', 'server'];
	const done: string[] = [];
	while (done.length < 8) {
		await pause(between(random, 400, 1_800));
		if (ended()) break;
		const act = acts[(seed + done.length) % acts.length]!;
		if (act === 'cable') {
			await cable.unplug();
			await pause(between(random, 0, 1_000));
			await cable.replug();
		} else if (act === 'server') {
			await server.kill();
			await pause(between(random, 100, 1_500));
			await server.start();
		} else cable.noise(Uint8Array.from({ length: 300 }, () => wholeBetween(random, 0, 255)));
		done.push(act);
	}
	return done;
}

describe('a cable to the server', () => {
	it.each(Array.from({ length: rounds }, (_, i) => firstSeed + i))(
		'round %i loses no event and no turn, whatever happens to it',
		async (seed) => {
			const folder = mkdtempSync(join(tmpdir(), 'turnstead-cable-'));
			const port = join(folder, 'winder');
			const env: Record<string, string> = {};
			const server = await startServer({ cluster: { url: cluster.url, template }, env });
			let cable: CableCarrier | null = null;
			try {
				const winder = await server.addWinder({ timeScale: speedUp });
				await server.addCoil({ name: 'Coil over the cable', target: 900 });
				await server.stop();
				env.WINDER_SERIAL = `${port}=${winder.linkKey}`;
				await server.start();
				const simulation = startSimulation({
					server: server.url,
					winders: [{ winder: winder.id, linkKey: winder.linkKey, name: winder.name }],
					openCarrier: (_target, events) => (cable = openCableCarrier(port, events)),
					speedUp,
					seed,
					coils: 1,
					faults: { drop: 0.02, double: 0.03, corrupt: 0.03 },
					settleMsMax: 120_000
				});
				await until(() => cable !== null);
				let ended = false;
				const going = mischief(server, cable!, seed, () => ended);
				const result = await simulation.done;
				ended = true;
				expect(await going, 'something went wrong while it wound').not.toEqual([]);
				// What was acknowledged is on disk: the last totals may come a moment later than the last event.
				expect(await server.stop()).toBe(0);
				await expectTruth(server, winder, result.winders[0]!);
			} finally {
				await (cable as CableCarrier | null)?.remove();
				await server.remove();
				rmSync(folder, { recursive: true, force: true });
			}
		},
		roundMsMax
	);
});
