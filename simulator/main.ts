import { closeSync, openSync, writeSync } from 'node:fs';
import { readMemory, writeMemory } from './memory.ts';
import { readCommand, type Command } from './options.ts';
import { startSimulation, type SimulationResult } from './run.ts';

/** `npm run simulate`: see `--help`. */

/** A program that is killed forgets no more than this. */
const memoryMs = 500;

const exitCodes = { allAcknowledged: 0, someNot: 1, misunderstood: 2 };

const read = readCommand(process.argv.slice(2), process.env.TURNSTEAD_LINK_KEY);
if (!read.ok) {
	console.error(read.says);
	process.exitCode = exitCodes.misunderstood;
} else if ('help' in read) process.stdout.write(read.help);
else process.exitCode = await play(read.command);

async function play(command: Command): Promise<number> {
	// One write a line, at once: what was logged is there even if this process is killed.
	const truth = command.truthFile === null ? null : openSync(command.truthFile, 'a');
	const { memoryFile } = command;
	const memory = memoryFile === null ? {} : readMemory(memoryFile);
	const simulation = startSimulation({
		...command.simulation,
		memory,
		...(truth !== null && {
			truth: (entry) => {
				writeSync(truth, JSON.stringify(entry) + '\n');
			}
		}),
		tell: (text, problem) => {
			if (problem) console.error(text);
			else if (!command.quiet) console.log(text);
		}
	});
	const keep = () => memoryFile !== null && writeMemory(memoryFile, simulation.winders, memory);
	const keeping = memoryFile === null ? null : setInterval(keep, memoryMs);
	const stop = () => void simulation.stop();
	process.on('SIGTERM', stop);
	process.on('SIGINT', stop);
	const parent = process.ppid;
	const orphaned = command.withParent ? setInterval(() => process.ppid !== parent && stop(), 1000) : null;

	const result = await simulation.done;
	if (keeping) clearInterval(keeping);
	keep();
	if (orphaned) clearInterval(orphaned);
	process.off('SIGTERM', stop);
	process.off('SIGINT', stop);
	if (truth !== null) closeSync(truth);
	if (!command.quiet) report(result);
	return result.allAcknowledged ? exitCodes.allAcknowledged : exitCodes.someNot;
}

function report(result: SimulationResult): void {
	for (const winder of result.winders) {
		const events = winder.boots.reduce((sum, boot) => sum + boot.events.length, 0);
		const boot = winder.boots[winder.boots.length - 1]!;
		console.log(
			`${winder.winder}: ${winder.coilsReached} coils, ${winder.revolutions.toFixed(1)} revolutions; ` +
				`boot ${boot.boot} counted ${boot.forward} forward, ${boot.reverse} reverse; ` +
				`${events} events, ${winder.eventsWaiting} not acknowledged, ${winder.eventsLost} lost with a restart or for room`
		);
	}
}
