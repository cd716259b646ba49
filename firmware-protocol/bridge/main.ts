import { mkdir, readFile, writeFile } from 'node:fs/promises';
import { join } from 'node:path';
import { Bridge } from './bridge.ts';
import { takeLock } from './lock.ts';
import { readCommand, type Command } from './options.ts';
import { Spool } from './spool.ts';
import { serveStatus } from './status.ts';
import { openHttpUplink } from './uplink-http.ts';
import { openWsUplink } from './uplink-ws.ts';

/** `npm run bridge`: see `--help`. */

const exitCodes = { ended: 0, failed: 1, misunderstood: 2 };
/** One press of Ctrl-C reaches this process twice, from the terminal and from npm; a second press comes later than this. */
const samePressMs = 1_000;

const read = readCommand(process.argv.slice(2), {
	linkKey: process.env.TURNSTEAD_LINK_KEY,
	stateDirectory: process.env.STATE_DIRECTORY,
	stateHome: process.env.XDG_STATE_HOME
});
if (!read.ok) {
	console.error(read.says);
	process.exitCode = exitCodes.misunderstood;
} else if ('help' in read) process.stdout.write(read.help);
else {
	try {
		const refused = await start(read.command);
		if (refused !== null) {
			console.error(refused);
			process.exitCode = exitCodes.failed;
		}
	} catch (error) {
		const { code, message } = error as NodeJS.ErrnoException;
		console.error(code ? `The spool in ${read.command.folder} cannot be used (${code}): ${message}` : error);
		process.exitCode = exitCodes.failed;
	}
}

/** Why it did not start, or null. */
async function start(command: Command): Promise<string | null> {
	const { folder } = command;
	for (const warning of command.warnings) console.error(warning);
	await mkdir(folder, { recursive: true, mode: 0o700 });
	const lock = await takeLock(folder);
	if (!lock.ok) {
		return `Another bridge (process ${lock.holder}) uses the spool ${folder}. Nothing was started. One bridge a port: end that one first.`;
	}
	const other = await belongsTo(command);
	if (other !== null) {
		await lock.held.release();
		return other;
	}
	const spool = await Spool.open({ folder, bytesMax: command.spoolBytesMax });
	const target = {
		server: command.server,
		winder: command.winder,
		linkKey: command.linkKey,
		insecureTls: command.insecureTls
	};
	const bridge = new Bridge({
		port: command.port,
		spool,
		folder,
		openUplink: (events) =>
			command.carrier === 'http'
				? openHttpUplink({ ...target, winder: command.winder! }, events)
				: openWsUplink(target, events),
		tell: (text) => console.log(text)
	});
	const status = command.statusPort < 0 ? null : await serveStatus(command.statusPort, () => bridge.state());
	let stopAskedAt: number | null = null;
	const stop = () => {
		const now = performance.now();
		if (stopAskedAt !== null) {
			if (now - stopAskedAt > samePressMs) process.exit(130);
			return;
		}
		stopAskedAt = now;
		void (async () => {
			await bridge.stop();
			await status?.close();
			await lock.held.release();
			console.log('Stopped. Everything acknowledged is on disk.');
			process.exit(exitCodes.ended);
		})();
	};
	process.on('SIGTERM', stop);
	process.on('SIGINT', stop);

	const { lines } = spool.state();
	console.log(`Bridge from ${command.port} to ${command.server.origin}, spool in ${folder} (${lines} lines kept).`);
	if (status) console.log(`Status at ${status.url}`);
	return null;
}

/** What lines are kept for must not change under them. */
async function belongsTo({ folder, server, winder }: Command): Promise<string | null> {
	const file = join(folder, 'belongs-to');
	const mine = `${server.origin} ${winder ?? '-'}\n`;
	const before = await readFile(file, 'utf8').catch(() => null);
	if (before === null || before === mine) {
		if (before === null) await writeFile(file, mine, { mode: 0o600 });
		return null;
	}
	return (
		`The spool ${folder} holds lines for ${before.trim()}, not for ${mine.trim()}. Nothing was started and nothing is lost: ` +
		`start it for that winder until it has caught up, or give this one a folder of its own with --spool.`
	);
}
