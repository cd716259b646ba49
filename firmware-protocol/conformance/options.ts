import { parseArgs } from 'node:util';
import { sessionMsMax, turnsAsked } from './play.ts';
import { rules, type Level } from './rules.ts';

/** The command line, read and put into words. */

export interface Command {
	/** Exactly one of these. */
	way: { kind: 'port'; path: string } | { kind: 'url'; url: URL } | { kind: 'exec'; program: string; driven: boolean };
	level: Level;
	/** Where the whole session is written to, or null. */
	recordFile: string | null;
}

export type ReadCommand = { ok: true; command: Command } | { ok: true; help: string } | { ok: false; says: string };

export const help = `Plays a host in front of a winder and says, rule by rule, whether it keeps firmware-protocol/PROTOCOL.md.

  npm run conformance -- --port <device> | --url <address> | --exec <program> [options]

  --port <device>       a winder at a serial port: /dev/ttyACM0, better a name of /dev/serial/by-id
  --url <address>       listens at an address of this computer, such as ws://0.0.0.0:4180/api/v1/link, where the winder is told
                        that Turnstead is; any link key will do
  --exec <program>      a winder that is a program, with its arguments in one string: speaks over its standard input and output
  --driven              with --exec: the program is told its time and the turns of its spindle, in the orders that
                        core/host/winder.c describes for --script; takes as long as it computes
  --level basic|full    basic asks for lines out, ?, SET, ACK and SYNC; full for every rule (full)
  --record <file>       writes the whole session, with the line numbers that the report names

Takes at most ${sessionMsMax / 1000} s from the winder's first line. In between you are asked to turn the spindle by hand about ${turnsAsked} turns; it waits
for the count and goes on by itself. Nothing is asked to stop or to start. The winder is told that its lines are stored: run
this on one that keeps nothing you still want.

Exit code 0: every rule of the level was seen and kept; 1: a rule was broken, or not shown; 2: no session could begin.

Rules (b: basic asks for it as well):
${rules.map(({ id, says, level }) => `  ${level === 'basic' ? 'b' : ' '} ${id.padEnd(18)}${says}`).join('\n')}
`;

class Misunderstood extends Error {}

const text = { type: 'string' } as const;
const flag = { type: 'boolean' } as const;
const known = {
	help: { ...flag, short: 'h' },
	port: text,
	url: text,
	exec: text,
	driven: flag,
	level: text,
	record: text
} as const;

/** Reads the arguments, without the program's own name. */
export function readCommand(args: string[]): ReadCommand {
	try {
		const values = parse(args);
		return values.help ? { ok: true, help } : { ok: true, command: understand(values) };
	} catch (error) {
		if (error instanceof Misunderstood) return { ok: false, says: error.message };
		throw error;
	}
}

type Values = ReturnType<typeof parse>;

function parse(args: string[]) {
	try {
		return parseArgs({ args, options: known, allowPositionals: false }).values;
	} catch (error) {
		throw new Misunderstood(`${(error as Error).message.split('. ')[0]}. See --help.`);
	}
}

function understand(values: Values): Command {
	const ways = [values.port, values.url, values.exec].filter((way) => way !== undefined);
	if (ways.length !== 1 || ways[0] === '')
		throw new Misunderstood('Which winder? One of --port <device>, --url <address> and --exec <program>. See --help.');
	if (values.driven && values.exec === undefined) throw new Misunderstood('--driven goes with --exec.');
	const level = values.level ?? 'full';
	if (level !== 'basic' && level !== 'full') throw new Misunderstood(`--level is basic or full, not ${level}`);
	return { way: wayOf(values), level, recordFile: values.record ?? null };
}

function wayOf(values: Values): Command['way'] {
	if (values.port !== undefined) return { kind: 'port', path: values.port };
	if (values.exec !== undefined) return { kind: 'exec', program: values.exec, driven: values.driven ?? false };
	const url = URL.canParse(values.url!) ? new URL(values.url!) : null;
	if (url?.protocol !== 'ws:')
		throw new Misunderstood(
			`--url wants an address to listen at, such as ws://0.0.0.0:4180/api/v1/link, not ${values.url}. It is the winder that opens the link.`
		);
	return { kind: 'url', url };
}
