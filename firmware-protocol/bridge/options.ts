import { readFileSync } from 'node:fs';
import { homedir } from 'node:os';
import { join, resolve } from 'node:path';
import { parseArgs } from 'node:util';

/** The command line, read and put into words. */

export interface Command {
	port: string;
	server: URL;
	carrier: 'ws' | 'http';
	winder: string | null;
	linkKey: string;
	folder: string;
	spoolBytesMax: number;
	statusPort: number;
	insecureTls: boolean;
	/** Things to say before it starts. */
	warnings: string[];
}

export type ReadCommand = { ok: true; command: Command } | { ok: true; help: string } | { ok: false; says: string };

/** What the environment may hold. */
export interface Environment {
	linkKey?: string | undefined;
	/** Made by systemd for the service (StateDirectory=). */
	stateDirectory?: string | undefined;
	stateHome?: string | undefined;
}

const statusPortDefault = 4174;
const spoolMb = { least: 1, usual: 256, most: 1024 * 1024 };

export const help = `The bridge: reads a winder at a serial port of this computer and brings its lines to Turnstead.

  npm run bridge -- --port <device> --server <address> [options]

  --port <device>       /dev/ttyACM0; better a name that stays: see ls -l /dev/serial/by-id
  --server <address>    address of Turnstead (http://bench.local:4173), or the one the winder's page shows for its lines
                        (http://…/api/v1/winders/<id>/lines) or for its WebSocket (ws://…/api/v1/link)
  --winder <id>         the winder's id, from its page; needed for --carrier http
  --carrier ws|http     how lines travel (ws, or what the address says)

The link key, from the winder's page, in one of three ways:
  TURNSTEAD_LINK_KEY    in the environment
  --key-file <file>     a file that holds the key and nothing else
  --key <key>           for a try: while it runs, everybody on this computer can read it in the list of processes

  --spool <folder>      where lines are kept until the server has them (in $STATE_DIRECTORY, else
                        ~/.local/state/turnstead-bridge, a folder for each winder)
  --spool-max <MB>      disk it may take (${spoolMb.usual}). Full, it gives up the oldest ticks, never an event; full of events it
                        keeps and acknowledges nothing new, and says so: the winder keeps its own
  --status <port>       a line of text at http://127.0.0.1:<port>/ and JSON at /status (${statusPortDefault}, or the next one free; "off")
  --insecure-tls        take a certificate nobody vouches for; only for a server on this computer. For a certificate of
                        your own: NODE_EXTRA_CA_CERTS=<file>

A line is acknowledged to the winder once it is on this computer's disk, and leaves it once the server has it on its own.
One bridge a port. Ctrl-C and SIGTERM end it in order; after a crash or a power cut it goes on where it was.
`;

class Misunderstood extends Error {}

const text = { type: 'string' } as const;
const known = {
	help: { type: 'boolean', short: 'h' },
	port: text,
	server: text,
	winder: text,
	carrier: text,
	key: text,
	'key-file': text,
	spool: text,
	'spool-max': text,
	status: text,
	'insecure-tls': { type: 'boolean' }
} as const;

/** Reads the arguments, without the program's own name. */
export function readCommand(args: string[], environment: Environment): ReadCommand {
	try {
		const values = parse(args);
		return values.help ? { ok: true, help } : { ok: true, command: understand(values, environment) };
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

function understand(values: Values, environment: Environment): Command {
	if (!values.port) throw new Misunderstood('Which port? --port /dev/ttyACM0, or see ls -l /dev/serial/by-id.');
	const address = addressOf(values.server);
	const winder = values.winder ?? address.winder;
	const carrier = values.carrier ?? address.carrier ?? 'ws';
	if (carrier !== 'ws' && carrier !== 'http') throw new Misunderstood(`--carrier is ws or http, not ${carrier}`);
	if (carrier === 'http' && winder === null)
		throw new Misunderstood('Over http the winder’s id is needed: --winder <id>, from its page.');
	const { hostname } = address.server;
	const insecureTls = values['insecure-tls'] ?? false;
	if (insecureTls && !isLoopback(hostname))
		throw new Misunderstood(`--insecure-tls is for a server on this computer, not ${hostname}`);
	const warnings: string[] = [];
	if (values.key !== undefined)
		warnings.push(
			'The link key stands on the command line, where everybody on this computer can read it. Better: --key-file, or TURNSTEAD_LINK_KEY.'
		);
	if (address.server.protocol === 'http:' && !isLoopback(hostname))
		warnings.push(`The link key goes to ${hostname} over plain http: use it in a network you trust, or https.`);
	return {
		port: values.port,
		server: address.server,
		carrier,
		winder,
		linkKey: keyOf(values, environment),
		folder: folderOf(values, environment, winder),
		spoolBytesMax: whole('--spool-max', values['spool-max'], spoolMb.least, spoolMb.most, spoolMb.usual) * 1024 * 1024,
		statusPort: values.status === 'off' ? -1 : whole('--status', values.status, 0, 65_535, statusPortDefault),
		insecureTls,
		warnings
	};
}

function addressOf(given: string | undefined): { server: URL; winder: string | null; carrier: 'ws' | 'http' | null } {
	if (!given)
		throw new Misunderstood('Which server? --server http://bench.local:4173, or the address on the winder’s page.');
	const url = URL.canParse(given) ? new URL(given) : null;
	const schemes: Record<string, string> = { 'http:': 'http:', 'https:': 'https:', 'ws:': 'http:', 'wss:': 'https:' };
	const scheme = url && schemes[url.protocol];
	if (!url || !scheme)
		throw new Misunderstood(`--server wants an address such as http://bench.local:4173, not ${given}`);
	const server = new URL(`${scheme}//${url.host}`);
	const lines = /^\/api\/v1\/winders\/([^/]+)\/lines\/?$/.exec(url.pathname);
	if (lines) return { server, winder: decodeURIComponent(lines[1]!), carrier: 'http' };
	if (/^\/api\/v1\/link\/?$/.test(url.pathname)) return { server, winder: null, carrier: 'ws' };
	if (url.pathname !== '/')
		throw new Misunderstood(`${given} is neither Turnstead's address nor one of a winder's page.`);
	return { server, winder: null, carrier: url.protocol.startsWith('ws') ? 'ws' : null };
}

function keyOf(values: Values, { linkKey }: Environment): string {
	let key = values.key ?? linkKey;
	if (values['key-file'] !== undefined) {
		if (values.key !== undefined) throw new Misunderstood('--key and --key-file: one of the two.');
		try {
			key = readFileSync(values['key-file'], 'utf8').trim();
		} catch (error) {
			throw new Misunderstood(`${values['key-file']} cannot be read: ${(error as NodeJS.ErrnoException).code}`);
		}
	}
	if (!key) throw new Misunderstood('The link key is missing: TURNSTEAD_LINK_KEY, --key-file or --key. See --help.');
	if (!/^[!-~]{8,200}$/.test(key)) throw new Misunderstood('That is no link key: it has 8 to 200 visible characters.');
	return key;
}

function folderOf(values: Values, { stateDirectory, stateHome }: Environment, winder: string | null): string {
	if (values.spool !== undefined) return resolve(values.spool);
	// systemd separates several by colons.
	const base =
		stateDirectory?.split(':')[0] ?? join(stateHome ?? join(homedir(), '.local', 'state'), 'turnstead-bridge');
	const name = winder ?? values.port!.replace(/^\/dev\//, '');
	return join(base, name.replace(/[^A-Za-z0-9_.-]+/g, '-').replace(/^\.+$/, '-'));
}

function whole(option: string, given: string | undefined, least: number, most: number, usual: number): number {
	if (given === undefined) return usual;
	const value = /^\d{1,7}$/.test(given) ? Number(given) : NaN;
	if (!(value >= least && value <= most)) throw new Misunderstood(`${option} is ${least} to ${most}, not ${given}`);
	return value;
}

function isLoopback(hostname: string): boolean {
	return hostname === 'localhost' || hostname === '[::1]' || /^127(\.\d{1,3}){3}$/.test(hostname);
}
