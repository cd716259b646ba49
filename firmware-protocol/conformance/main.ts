import { writeFile } from 'node:fs/promises';
import { NoWinder, type Carrier } from './carrier.ts';
import { mustHaveStarted, openDriven, openExec } from './carrier-exec.ts';
import { openSerial } from './carrier-serial.ts';
import { openWs } from './carrier-ws.ts';
import { readCommand, type Command } from './options.ts';
import { play } from './play.ts';
import { isProved, recordText, reportText } from './report.ts';
import { judge } from './rules.ts';

/** `npm run conformance`: see `--help`. */

const exitCodes = { proved: 0, notProved: 1, noSession: 2 };
const tell = (text: string) => console.error(text);

const read = readCommand(process.argv.slice(2));
if (!read.ok) {
	tell(read.says);
	process.exitCode = exitCodes.noSession;
} else if ('help' in read) process.stdout.write(read.help);
else {
	try {
		process.exitCode = await run(read.command);
	} catch (error) {
		if (!(error instanceof NoWinder)) throw error;
		tell(error.message);
		process.exitCode = exitCodes.noSession;
	}
}

async function run({ way, level, recordFile }: Command): Promise<number> {
	const carrier = await open(way);
	let session;
	try {
		// Ids grow from command to command, also from one run to the next in the same boot: tenths of a second do.
		const firstId = Math.floor(Date.now() / 100) % 2 ** 32;
		session = await play(carrier, { level, firstId, tell });
		mustHaveStarted(carrier);
		const why = carrier.gone();
		if (why !== null) tell(`The session ended early: ${why}.`);
	} finally {
		await carrier.close();
	}
	const verdicts = judge(session, level);
	if (recordFile !== null) {
		try {
			await writeFile(recordFile, recordText(session));
		} catch (error) {
			tell(`The record could not be written: ${(error as Error).message}`);
		}
	}
	process.stdout.write(reportText(session, verdicts, level));
	if (recordFile === null && !isProved(verdicts)) tell('For the whole session: --record <file>.');
	return isProved(verdicts) ? exitCodes.proved : exitCodes.notProved;
}

function open(way: Command['way']): Carrier | Promise<Carrier> {
	if (way.kind === 'port') return openSerial(way.path, tell);
	if (way.kind === 'url') return openWs(way.url, tell);
	return way.driven ? openDriven(way.program) : openExec(way.program);
}
