import { sleep } from '../../src/commands/processes.ts';
import type { Fleet } from './fleet.ts';
import { LineMaker, periodMs } from './winder.ts';

/** Lines may still be on their way when the last was sent. */
const lastEventsMs = 300;
/** Between the word that a spindle turns and its first turn. */
const runUpMs = 200;
/** The last turn of a round comes this late: three times as slow as those before, as a spindle that runs down. */
const coastMs = 300;

/** Winders of one way with the lines they make, kept through all rounds. */
export interface Player {
	fleet: Fleet;
	makers: LineMaker[];
}

/** What of a round reached the screens, in milliseconds, and how many lines did not. */
export interface Round {
	delaysMs: number[];
	lost: number;
}

export const newPlayer = (fleet: Fleet): Player => ({
	fleet,
	makers: Array.from({ length: fleet.size }, () => new LineMaker())
});

/** Each winder says who it is. */
export function introduce({ fleet, makers }: Player): void {
	for (const [winder, maker] of makers.entries()) fleet.send(winder, [maker.hi()]);
}

/**
 * All winders of all players send ten lines a second for `ms`, evenly spread over the period, and each line waits for the
 * first event that shows its count or a later one. Returns one round a player, in their order.
 */
export async function playRound(players: readonly Player[], ms: number): Promise<Round[]> {
	const rounds = players.map((): Round => ({ delaysMs: [], lost: 0 }));
	const waiting = players.map((player) => player.makers.map((): [number, number][] => []));
	for (const [i, { fleet }] of players.entries()) {
		fleet.onSeen = (winder, turns, atMs) => {
			const queue = waiting[i]?.[winder] ?? [];
			while (queue[0] && queue[0][0] <= turns) {
				rounds[i]?.delaysMs.push(atMs - (queue.shift() as [number, number])[1]);
			}
		};
	}
	const seats = players.flatMap(({ fleet, makers }, i) => makers.map((maker, winder) => ({ i, fleet, maker, winder })));
	// Players take turns line by line where each has one winder.
	const stepMs = periodMs / seats.length;
	for (const { fleet, maker, winder } of seats) fleet.send(winder, [maker.go()]);
	await sleep(runUpMs);
	const from = performance.now();
	for (let sent = 0; ;) {
		const now = performance.now();
		if (now - from >= ms) break;
		for (; from + sent * stepMs <= now; sent += 1) {
			const seat = seats[sent % seats.length];
			if (!seat) break;
			const line = seat.maker.tick();
			waiting[seat.i]?.[seat.winder]?.push([seat.maker.turns, performance.now()]);
			seat.fleet.send(seat.winder, [line]);
		}
		await sleep(Math.max(0, from + sent * stepMs - performance.now()));
	}
	await sleep(coastMs);
	for (const { fleet, maker, winder } of seats) fleet.send(winder, maker.coastDown());
	await sleep(lastEventsMs);
	for (const [i, { fleet }] of players.entries()) {
		fleet.onSeen = () => {};
		for (const queue of waiting[i] ?? []) if (rounds[i]) rounds[i].lost += queue.length;
	}
	return rounds;
}
