import { readFileSync } from 'node:fs';
import { parseArgs } from 'node:util';
import { wordCharsMax } from '../src/lib/turnline/index.ts';
import type { FaultTraits, Outage } from './faults.ts';
import { about, isLoopback, speedUpMax, type SimulationOptions, type WinderTarget } from './run.ts';
import { scenarioNames, scenarios, type ScenarioName } from './scenarios.ts';

/** The command line, read and put into words. */

export interface Command {
	simulation: SimulationOptions;
	truthFile: string | null;
	memoryFile: string | null;
	quiet: boolean;
	/** End when the process that started this one is gone. */
	withParent: boolean;
}

export type ReadCommand = { ok: true; command: Command } | { ok: true; help: string } | { ok: false; says: string };

const defaultServer = 'http://127.0.0.1:4173';
const windersMax = 500;

export const help = `Simulated winders: motor, hands and a link, good or bad, that wind what the bench asks for.

  npm run simulate -- --winder <id> [options]

Which winders
  --server <url>        address of Turnstead (${defaultServer})
  --winder <id>         one winder; its link key comes from TURNSTEAD_LINK_KEY or --key-file
  --key-file <file>     file that holds the link key and nothing else
  --winder <id>:<file>  a winder and the file of its link key; repeat it for several winders
  --winders <file>      several winders: [{"winder": "<id>", "linkKey": "<key>", "name": "w-01"}, …]
  --name <word>         how a single winder calls itself in its lines
  --carrier ws|http     how lines travel (ws)
  --insecure-tls        take a certificate nobody vouches for; only for a server on this machine

What happens
  --scenario <name>
${scenarioNames.map((name) => `      ${name.padEnd(18)}${scenarios[name].says}`).join('\n')}
                        (workshop)
  --coils <n>           end when each winder has wound so many coils (the scenario's own number)
  --seed <n>            the same seed gives the same hands and the same faults (1)
  --speed-up <n>        simulated time runs n times faster, up to ${speedUpMax}. The winder's time scale at the server must
                        be the same n: npm run -s admin -- add-winder --help
  --look-seconds <n>    how long a look takes, about (5)
  --start-seconds <n>   from the plan to the first turn, about (5 for the first coil, 14 for the next)
  --rpm <n>             highest speed of the spindle (720)

The winder
  --pulses-per-turn <n> magnets on the spindle (1)
  --one-sensor          does not see the direction
  --keep-lines <n>      lines it can keep while the link is down (256, at least 32)
  --retain              totals survive a restart of the microcontroller
  --memory <file>       they survive the end of this program as well, in this file
  --bounce <share>      share of the sensor's changes that chatter, 0 to 1
  --miss <share>        share of passing magnets that go unseen, 0 to 1

A bad link; shares are 0 to 1, for each line, in both directions. They replace those of the scenario.
  --drop <share>        lost on the way
  --double <share>      comes twice
  --reorder <share>     overtaken by later ones
  --corrupt <share>     a character spoilt
  --delay <ms>          mean delay
  --outage <from>:<for> no link at all, from so many seconds after the start, for so many; may be repeated

What it writes
  --truth <file>        truth log, one JSON text a line: what spindle, wire and winder really did, each event and
                        whether it was acknowledged, and the totals of each boot at the end
  --quiet               only problems
  --with-parent         end when the program that started this one is gone

Ends with Ctrl-C, SIGTERM or after the last coil, and says goodbye to the server. Exit code 0: every event was
acknowledged; 1: some were not; 2: the command could not be understood.

This simulates a winder that starts when its maker presses a pedal. Turnstead itself never starts a motor.
`;

/**
 * Reads the arguments.
 *
 * @param args without the program's own name
 * @param linkKey TURNSTEAD_LINK_KEY, where it is set
 */
export function readCommand(args: string[], linkKey: string | undefined): ReadCommand {
	try {
		return understand(args, linkKey);
	} catch (error) {
		if (error instanceof Misunderstood) return { ok: false, says: error.message };
		throw error;
	}
}

class Misunderstood extends Error {}

const text = { type: 'string' } as const;
const several = { type: 'string', multiple: true } as const;
const flag = { type: 'boolean' } as const;

const known = {
	help: { type: 'boolean', short: 'h' },
	server: text,
	winder: several,
	winders: text,
	'key-file': text,
	name: text,
	carrier: text,
	'insecure-tls': flag,
	scenario: text,
	coils: text,
	seed: text,
	'speed-up': text,
	'look-seconds': text,
	'start-seconds': text,
	rpm: text,
	'pulses-per-turn': text,
	'one-sensor': flag,
	'keep-lines': text,
	retain: flag,
	memory: text,
	bounce: text,
	miss: text,
	drop: text,
	double: text,
	reorder: text,
	corrupt: text,
	delay: text,
	outage: several,
	truth: text,
	quiet: flag,
	'with-parent': flag
} as const;

type Values = ReturnType<typeof parse>;

function parse(args: string[]) {
	try {
		return parseArgs({ args, options: known, allowPositionals: false }).values;
	} catch (error) {
		throw new Misunderstood(`${(error as Error).message.split('. ')[0]}. See --help.`);
	}
}

function understand(args: string[], linkKey: string | undefined): ReadCommand {
	const values = parse(args);
	if (values.help) return { ok: true, help };
	const scenario = oneOf('--scenario', values.scenario ?? 'workshop', scenarioNames) as ScenarioName;
	const server = serverOf(values.server ?? defaultServer);
	if (values['insecure-tls'] && !isLoopback(server.hostname))
		throw new Misunderstood(`--insecure-tls is for a server on this machine, not ${server.hostname}`);
	const lookSeconds = number('--look-seconds', values['look-seconds'], 0.1, 3600);
	const startSeconds = number('--start-seconds', values['start-seconds'], 0.1, 3600);
	const rpm = number('--rpm', values.rpm, 60, 3000);
	const simulation: SimulationOptions = {
		server: server.origin,
		winders: windersOf(values, linkKey),
		scenario,
		carrier: oneOf('--carrier', values.carrier ?? 'ws', ['ws', 'http']) as 'ws' | 'http',
		speedUp: number('--speed-up', values['speed-up'], 1, speedUpMax) ?? 1,
		seed: whole('--seed', values.seed, 0, 2 ** 32) ?? 1,
		insecureTls: values['insecure-tls'] ?? false,
		faults: faultsOf(values),
		device: {
			...given('pulsesPerTurn', whole('--pulses-per-turn', values['pulses-per-turn'], 1, 64)),
			...given('bufLines', whole('--keep-lines', values['keep-lines'], 32, 100_000)),
			...(values['one-sensor'] && { seesDirection: false }),
			...((values.retain || values.memory !== undefined) && { retains: true })
		},
		sensor: {
			...given('bounceChance', number('--bounce', values.bounce, 0, 1)),
			...given('missChance', number('--miss', values.miss, 0, 1))
		},
		maker: {
			...(lookSeconds !== undefined && { lookMs: about(lookSeconds) }),
			...(startSeconds !== undefined && { startMs: about(startSeconds), firstStartMs: about(startSeconds) })
		},
		spindle: given('rpmTop', rpm),
		...given('coils', whole('--coils', values.coils, 1, 100_000))
	};
	return {
		ok: true,
		command: {
			simulation,
			truthFile: values.truth ?? null,
			memoryFile: values.memory ?? null,
			quiet: values.quiet ?? false,
			withParent: values['with-parent'] ?? false
		}
	};
}

function given<K extends string>(key: K, value: number | undefined): Partial<Record<K, number>> {
	return value === undefined ? {} : ({ [key]: value } as Record<K, number>);
}

function serverOf(given: string): URL {
	if (!URL.canParse(given)) throw new Misunderstood(`--server wants an address such as ${defaultServer}, not ${given}`);
	const url = new URL(given);
	if (url.protocol !== 'http:' && url.protocol !== 'https:')
		throw new Misunderstood(`--server begins with http:// or https://, not ${url.protocol}//`);
	return url;
}

function windersOf(values: Values, linkKey: string | undefined): WinderTarget[] {
	const winders: WinderTarget[] = values.winders === undefined ? [] : windersIn(values.winders);
	for (const given of values.winder ?? []) {
		const colon = given.indexOf(':');
		if (colon > 0) winders.push({ winder: given.slice(0, colon), linkKey: keyIn(given.slice(colon + 1)) });
		else winders.push({ winder: given, linkKey: keyFor(given, values['key-file'], linkKey) });
	}
	if (winders.length === 0) throw new Misunderstood('Which winder? --winder <id>, or --winders <file>. See --help.');
	if (winders.length > windersMax)
		throw new Misunderstood(`${winders.length} winders are too many: at most ${windersMax}`);
	if (values.name !== undefined) {
		if (winders.length > 1) throw new Misunderstood('--name is for a single winder; --winders names several');
		winders[0]!.name = values.name;
	}
	for (const { name } of winders) {
		if (name !== undefined && !(name.length <= wordCharsMax && /^[!-}]+$/.test(name)))
			throw new Misunderstood(
				`a winder's name is 1 to ${wordCharsMax} letters and signs without spaces, not "${name}"`
			);
	}
	return winders;
}

function keyFor(winder: string, file: string | undefined, linkKey: string | undefined): string {
	if (file !== undefined) return keyIn(file);
	if (linkKey) return linkKey;
	throw new Misunderstood(
		`The link key of ${winder} is missing: set TURNSTEAD_LINK_KEY, or give --key-file or --winder ${winder}:<file>`
	);
}

function keyIn(file: string): string {
	const key = read(file).trim();
	if (!/^[!-~]{8,200}$/.test(key)) throw new Misunderstood(`${file} does not hold a link key and nothing else`);
	return key;
}

function windersIn(file: string): WinderTarget[] {
	let list: unknown;
	try {
		list = JSON.parse(read(file));
	} catch (error) {
		if (error instanceof Misunderstood) throw error;
		throw new Misunderstood(`${file} is not JSON: ${(error as Error).message}`);
	}
	const word = (value: unknown) => typeof value === 'string' && value !== '';
	const good = (entry: Record<string, unknown> | null) =>
		word(entry?.winder) && word(entry?.linkKey) && (entry?.name === undefined || word(entry.name));
	if (!Array.isArray(list) || !list.every(good))
		throw new Misunderstood(`${file} wants [{"winder": "<id>", "linkKey": "<key>", "name": "w-01"}, …]`);
	return list.map(({ winder, linkKey, name }) => ({ winder, linkKey, ...(name !== undefined && { name }) }));
}

function read(file: string): string {
	try {
		return readFileSync(file, 'utf8');
	} catch (error) {
		throw new Misunderstood(`${file} cannot be read: ${(error as NodeJS.ErrnoException).code}`);
	}
}

function faultsOf(values: Values): Partial<FaultTraits> {
	return {
		...given('drop', number('--drop', values.drop, 0, 1)),
		...given('double', number('--double', values.double, 0, 1)),
		...given('reorder', number('--reorder', values.reorder, 0, 1)),
		...given('corrupt', number('--corrupt', values.corrupt, 0, 1)),
		...given('delayMs', number('--delay', values.delay, 0, 60_000)),
		...(values.outage && { outages: values.outage.map(outageOf) })
	};
}

function outageOf(given: string): Outage {
	const parts = /^(\d+(?:\.\d+)?):(\d+(?:\.\d+)?)$/.exec(given);
	if (!parts) throw new Misunderstood(`--outage wants <from>:<for> in seconds, such as 20:15, not ${given}`);
	return { fromS: Number(parts[1]), forS: Number(parts[2]) };
}

function number(option: string, given: string | undefined, least: number, most: number): number | undefined {
	if (given === undefined) return undefined;
	const value = given.trim() === '' ? NaN : Number(given);
	if (!(value >= least && value <= most)) throw new Misunderstood(`${option} is ${least} to ${most}, not ${given}`);
	return value;
}

function whole(option: string, given: string | undefined, least: number, most: number): number | undefined {
	const value = number(option, given, least, most);
	if (value !== undefined && !Number.isInteger(value))
		throw new Misunderstood(`${option} is a whole number, not ${given}`);
	return value;
}

function oneOf(option: string, given: string, names: readonly string[]): string {
	if (!names.includes(given)) throw new Misunderstood(`${option} is one of ${names.join(', ')}, not ${given}`);
	return given;
}
