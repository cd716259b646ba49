import { sleep } from '../../src/commands/processes.ts';
import { openFleet, serverPlaces } from './fleet.ts';
import { introduce, newPlayer, playRound } from './latency.ts';
import type { Options } from './options.ts';
import { startServer } from './programs.ts';
import type { Report } from './report.ts';
import { figure } from './statistics.ts';
import type { Ground } from './workshop.ts';

const winders = 100;
const settleMs = 1_000;
const playMs = 1_000;

/** From SIGTERM to the end of the process, with links and streams open and lines not yet written. */
export async function measureExit(ground: Ground, report: Report, { quick }: Options): Promise<void> {
	const times = quick ? 1 : 3;
	const workshop = await ground.newWorkshop();
	const added = await workshop.addWinders(winders, true);
	const took: number[] = [];
	for (let time = 0; time < times; time += 1) {
		const server = await startServer(workshop.database.url);
		const player = newPlayer(await openFleet(winders, serverPlaces(server.port, added), 'ws'));
		introduce(player);
		await sleep(settleMs);
		await playRound([player], playMs);
		// These are still to be written when the signal comes.
		for (const [winder, maker] of player.makers.entries()) player.fleet.send(winder, [maker.go(), maker.tick()]);
		await sleep(5);
		const { ms, code } = await server.stop();
		if (code !== 0) throw new Error(`the server ended with ${code}`);
		took.push(ms);
		await player.fleet.close();
	}
	report.exit({ took, winders });
	report.say(`exit: ${took.map((ms) => `${figure(ms)} ms`).join(', ')}`);
}
