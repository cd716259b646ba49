import { sleep } from '../../src/commands/processes.ts';
import { openBrokerFleet, openFleet, relayPlaces, serverPlaces, type Fleet } from './fleet.ts';
import { introduce, newPlayer, playRound, type Player } from './latency.ts';
import { startBroker, startRelay, startServer, type Program } from './programs.ts';
import type { Options } from './options.ts';
import type { Report } from './report.ts';
import { figure, percentile } from './statistics.ts';
import type { Ground } from './workshop.ts';

interface Level {
	winders: number;
	rounds: number;
	roundMs: number;
	/** One winder loads nothing: all ways are played at once, line by line in turn, and share whatever disturbs them. */
	together: boolean;
}

export const levels: Level[] = [
	{ winders: 1, rounds: 3, roundMs: 6_000, together: true },
	{ winders: 20, rounds: 3, roundMs: 1_800, together: false },
	{ winders: 100, rounds: 3, roundMs: 2_200, together: false }
];
/** Enough for the compiler of the program to have settled. */
const warmUpMs = 1_000;
/** Coils find their benches, and screens their first state. */
const settleMs = 1_000;
const aim = 1.3;

interface Way {
	name: string;
	/** The way it is compared with. */
	beside: string | null;
	open(winders: number): Promise<Fleet>;
}

/** From a line to the event a screen has of it. */
export async function measureLatency(ground: Ground, report: Report, { quick, profile, winders }: Options) {
	const workshop = await ground.newWorkshop();
	const played = levels.filter((level) => winders.length === 0 || winders.includes(level.winders));
	const most = Math.max(...played.map((level) => level.winders));
	const [overWs, overHttp] = [await workshop.addWinders(most, true), await workshop.addWinders(most, true)];
	const server = await startServer(workshop.database.url, { profileFolder: profile });
	const relay = await startRelay();
	const broker = await startBroker();
	const programs: Program[] = [server, relay];
	const ways: Way[] = [
		{ name: 'relay, ws', beside: null, open: (n) => openFleet(n, relayPlaces(relay.port), 'ws') },
		{ name: 'Turnstead, ws', beside: 'relay, ws', open: (n) => openFleet(n, serverPlaces(server.port, overWs), 'ws') },
		{ name: 'relay, http', beside: null, open: (n) => openFleet(n, relayPlaces(relay.port), 'http') },
		{
			name: 'Turnstead, http',
			beside: 'relay, http',
			open: (n) => openFleet(n, serverPlaces(server.port, overHttp), 'http')
		}
	];
	if ('why' in broker) report.note(`The row of mosquitto is left out: ${broker.why}.`);
	else {
		programs.push(broker);
		ways.push({ name: 'mosquitto, QoS 1', beside: null, open: (n) => openBrokerFleet(n, broker.port) });
	}
	try {
		for (const level of played) await measureLevel(level, ways, report, quick);
	} finally {
		for (const program of programs) await program.stop();
	}
}

async function measureLevel(level: Level, ways: Way[], report: Report, quick: boolean): Promise<void> {
	const roundMs = quick ? level.roundMs / 3 : level.roundMs;
	const rounds = quick ? 2 : level.rounds;
	const players: Player[] = [];
	for (const way of ways) players.push(newPlayer(await way.open(level.winders)));
	for (const player of players) introduce(player);
	await sleep(settleMs);

	const play = async (ms: number) => {
		if (level.together) return playRound(players, ms);
		const played = [];
		for (const player of players) played.push(...(await playRound([player], ms)));
		return played;
	};
	await play(warmUpMs);
	const delays = ways.map((): number[][] => []);
	const lost = ways.map(() => 0);
	for (let round = 0; round < rounds; round += 1) {
		for (const [i, { delaysMs, lost: lines }] of (await play(roundMs)).entries()) {
			delays[i]?.push(delaysMs);
			lost[i] = (lost[i] ?? 0) + lines;
		}
	}
	for (const { fleet } of players) await fleet.close();

	const p99 = (i: number) => percentile((delays[i] ?? []).flat(), 0.99);
	for (const [i, way] of ways.entries()) {
		const all = (delays[i] ?? []).flat();
		const other = ways.findIndex(({ name }) => name === way.beside);
		const ofRounds = (delays[i] ?? []).map((own, round) => {
			const beside = delays[other]?.[round];
			return beside === undefined ? 0 : percentile(own, 0.99) / percentile(beside, 0.99);
		});
		report.latency({
			winders: level.winders,
			way: way.name,
			lines: all.length,
			p50Ms: percentile(all, 0.5),
			p99Ms: p99(i),
			ratio: other < 0 ? null : p99(i) / p99(other),
			ratios: other < 0 ? [] : ofRounds,
			aim
		});
		if ((lost[i] ?? 0) > 0) report.note(`${lost[i]} lines of ${way.name} at ${level.winders} never reached a screen.`);
	}
	const said = ways.map((way, i) => {
		const p50Ms = percentile((delays[i] ?? []).flat(), 0.5);
		return `${way.name} ${figure(p50Ms)} / ${figure(p99(i))}`;
	});
	report.say(`${level.winders} winders, p50 / p99 ms: ${said.join(' · ')}`);
}
