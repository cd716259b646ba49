import { Agent, request } from 'node:http';
import { connect, type Socket } from 'node:net';
import { sleep } from '../../src/commands/processes.ts';
import { bodyOf, openFleet, relayPlaces, serverPlaces, type Fleet, type Places } from './fleet.ts';
import { introduce, newPlayer, playRound, type Player } from './latency.ts';
import type { Options } from './options.ts';
import { startRelay, startServer, type Memory, type Program } from './programs.ts';
import type { Report } from './report.ts';
import { figure } from './statistics.ts';
import type { Ground } from './workshop.ts';

/** Come and go before anything is measured, so that compiled code and what is held once for all is there. */
const warmUp = 40;
const few = 20;
const more = 100;
const settleMs = 1_000;
/** Until recent lines and short memories of each winder are full. */
const playMs = { full: 5_500, quick: 4_000 };
/** Loopback holds some megabytes on its own: the stalled screen is sent several times that. */
const stalledBytes = 6 * 1024 * 1024;
const publishersAtOnce = 8;
const aimBytes = 30_000;

/** What a winder with a link and a screen costs, and what a screen costs that no longer reads. */
export async function measureMemory(ground: Ground, report: Report, { quick }: Options): Promise<void> {
	const ms = quick ? playMs.quick : playMs.full;
	const workshop = await ground.newWorkshop();
	const winders = await workshop.addWinders(warmUp + few + more, true);
	const server = await startServer(workshop.database.url, { askMemory: true });
	const relay = await startRelay({ askMemory: true });
	const players: Player[] = [];
	try {
		const own = await growth(server, serverPlaces(server.port, winders), players, ms);
		const bare = await growth(relay, relayPlaces(relay.port), players, ms);
		const stalled = await stallOne(server, serverPlaces(server.port, winders));
		report.memory({
			heapBytes: own.heapBytes / more,
			rssBytes: own.rssBytes / more,
			relayHeapBytes: bare.heapBytes / more,
			relayRssBytes: bare.rssBytes / more,
			from: few,
			to: few + more,
			aimBytes,
			stalled
		});
		report.say(`memory: ${figure(own.heapBytes / more / 1000)} kB of heap a winder and screen`);
	} finally {
		await Promise.all(players.map(({ fleet }) => fleet.close()));
		await server.stop();
		await relay.stop();
	}
}

async function growth(program: Program, places: Places, players: Player[], ms: number): Promise<Memory> {
	const warm = await openAndPlay(openFleet(warmUp, places, 'ws'), [], ms, players);
	await warm.fleet.close();
	players.splice(players.indexOf(warm), 1);
	const first = await openAndPlay(openFleet(few, after(places, warmUp), 'ws'), [], ms, players);
	const before = await program.memory();
	await openAndPlay(openFleet(more, after(places, warmUp + few), 'ws'), [first], ms, players);
	const grown = await program.memory();
	return { heapBytes: grown.heapBytes - before.heapBytes, rssBytes: grown.rssBytes - before.rssBytes };
}

/** The places of the winders behind the first so many. */
function after(places: Places, skip: number): Places {
	return {
		...places,
		linkPath: (winder) => places.linkPath(winder + skip),
		livePath: (winder) => places.livePath(winder + skip),
		headers: (winder) => places.headers(winder + skip)
	};
}

async function openAndPlay(opening: Promise<Fleet>, others: Player[], ms: number, players: Player[]): Promise<Player> {
	const player = newPlayer(await opening);
	players.push(player);
	introduce(player);
	await sleep(settleMs);
	await playRound([...others, player], ms);
	return player;
}

/**
 * A screen asks for the stream of a winder and reads nothing of it, while that winder's state is published again and again.
 * Each time a program asks for the state of a winder it is made anew and goes to all its screens.
 */
async function stallOne(
	server: Program,
	places: Places
): Promise<{ sentBytes: number; heapBytes: number; rssBytes: number }> {
	const winder = 0;
	const socket = await openStalled(places, winder);
	const agents = Array.from({ length: publishersAtOnce }, () => new Agent({ keepAlive: true, maxSockets: 1 }));
	const ask = async (agent: Agent): Promise<{ seq: number; bytes: number }> => {
		const body = await askState(places, winder, agent);
		return { seq: (JSON.parse(body) as { seq: number }).seq, bytes: Buffer.byteLength(body) };
	};
	const publish = async (bytes: number) => {
		let sent = 0;
		await Promise.all(
			agents.map(async (agent) => {
				while (sent < bytes) sent += (await ask(agent)).bytes;
			})
		);
		return sent;
	};
	try {
		// What the machine and the program hold for any screen is full, and the program warm, before it counts.
		await publish(stalledBytes / 2);
		const before = await server.memory();
		const firstSeq = (await ask(agents[0] as Agent)).seq;
		const sentBytes = await publish(stalledBytes);
		const states = (await ask(agents[0] as Agent)).seq - firstSeq;
		if (states < 1000) throw new Error(`only ${states} states were published past the stalled screen`);
		const after = await server.memory();
		return {
			sentBytes,
			heapBytes: after.heapBytes - before.heapBytes,
			rssBytes: after.rssBytes - before.rssBytes
		};
	} finally {
		socket.destroy();
		for (const agent of agents) agent.destroy();
	}
}

function askState(places: Places, winder: number, agent: Agent): Promise<string> {
	return new Promise((resolve, reject) => {
		const options = { host: '127.0.0.1', port: places.port, path: places.livePath(winder), agent };
		request({ ...options, headers: places.headers(winder) }, (answer) => void bodyOf(answer).then(resolve, reject))
			.on('error', reject)
			.end();
	});
}

/** Asks for the stream and never reads: not a byte is taken from the socket. */
function openStalled(places: Places, winder: number): Promise<Socket> {
	return new Promise((resolve, reject) => {
		const socket = connect({ host: '127.0.0.1', port: places.port });
		socket.once('error', reject);
		socket.once('connect', () => {
			socket.pause();
			const headers = { host: `127.0.0.1:${places.port}`, accept: 'text/event-stream', ...places.headers(winder) };
			const head = Object.entries(headers).map(([name, value]) => `${name}: ${value}\r\n`);
			socket.write(`GET ${places.livePath(winder)} HTTP/1.1\r\n${head.join('')}\r\n`, () => resolve(socket));
		});
	});
}
