import { parseArgs, type ParseArgsConfig } from 'node:util';
import { z } from 'zod';
import { hashPassword, passwordRefusals, refusePassword } from '../lib/server/auth/passwords.ts';
import { newToken } from '../lib/server/auth/tokens.ts';
import { findWorkshop, insertWorkshop, listWorkshops, type WorkshopRow } from '../lib/server/db/admin.ts';
import { inWorkshop } from '../lib/server/db/connect.ts';
import { migrationState } from '../lib/server/db/migrate.ts';
import { addPerson, findSignIn, listPeople, passwordLinkDays, setPassword } from '../lib/server/db/people.ts';
import type { Db } from '../lib/server/db/schema.ts';
import { addWinder, listWinders, newLinkKey, winderLimits } from '../lib/server/db/winders.ts';
import { startEnv } from '../lib/server/env.ts';
import { projectDatabaseUrl } from './cluster.ts';
import { projectFolder } from './data-folder.ts';
import { asOwner } from './database.ts';
import { PlainError, sayAndFail } from './plain-error.ts';

/**
 * The operator's command, beside a running server: workshops, people and winders from the shell of the machine. It signs
 * in to the database as its owner, so whoever may run it may do everything; nobody reaches it over the network.
 */

type Options = NonNullable<ParseArgsConfig['options']>;
type Given = Record<string, string | boolean | undefined>;

interface Verb {
	about: string;
	usage: string;
	options: Options;
	/** One line for each option, in the order of the help. */
	help: [string, string][];
	work(db: Db, given: Given): Promise<void>;
}

const json: [string, string] = ['--json', 'print one line of JSON and nothing else'];

const verbs: Record<string, Verb> = {
	'add-workshop': {
		about: 'Adds a workshop. Its first owner comes with add-person.',
		usage: '--short-name NAME --name "FULL NAME" [--time-zone ZONE]',
		options: {
			'short-name': { type: 'string' },
			name: { type: 'string' },
			'time-zone': { type: 'string' },
			json: { type: 'boolean' }
		},
		help: [
			['--short-name NAME', 'how commands call it: lower-case letters, digits and hyphens, 31 at most'],
			['--name "FULL NAME"', 'as it stands on its pages, 80 characters at most'],
			['--time-zone ZONE', 'IANA name, such as Europe/Berlin; the one of this machine unless given'],
			json
		],
		work: addWorkshop
	},
	'add-person': {
		about: 'Adds a person and prints a link to choose the first password, or takes the password from standard input.',
		usage: '--workshop NAME --email ADDRESS --name "FULL NAME" --role owner|maker|apprentice [--password-stdin]',
		options: {
			workshop: { type: 'string' },
			email: { type: 'string' },
			name: { type: 'string' },
			role: { type: 'string' },
			url: { type: 'string' },
			'password-stdin': { type: 'boolean' },
			json: { type: 'boolean' }
		},
		help: [
			['--workshop NAME', 'short name of the workshop'],
			['--email ADDRESS', 'signs in with it; one person, one workshop'],
			['--name "FULL NAME"', 'as others see it, 80 characters at most'],
			['--role ROLE', 'owner, maker or apprentice'],
			['--url ADDRESS', 'where the person reaches Turnstead, for the link; this machine unless given'],
			['--password-stdin', 'read the password from standard input instead of printing a link'],
			json
		],
		work: addOnePerson
	},
	'set-password': {
		about: 'Sets a password, read from standard input. Whoever was signed in with the old one is signed out.',
		usage: '--email ADDRESS < FILE',
		options: { email: { type: 'string' }, json: { type: 'boolean' } },
		help: [['--email ADDRESS', 'whose password'], json],
		work: setOnePassword
	},
	'add-winder': {
		about: 'Adds a winder and prints its link key, which is shown this once and kept only as a hash.',
		usage: '--workshop NAME --name NAME [options]',
		options: {
			workshop: { type: 'string' },
			name: { type: 'string' },
			ppr: { type: 'string', default: '1' },
			'rpm-max': { type: 'string', default: '2000' },
			'sees-direction': { type: 'boolean', default: false },
			'forward-is': { type: 'string', default: 'counter-clockwise' },
			'ease-early': { type: 'string', default: '40' },
			'stop-early': { type: 'string', default: '3' },
			'keep-after': { type: 'string' },
			'time-scale': { type: 'string', default: '1' },
			json: { type: 'boolean' }
		},
		help: [
			['--workshop NAME', 'short name of the workshop'],
			['--name NAME', 'what it is called, such as w-07; 16 characters at most'],
			['--ppr N', 'pulses per turn, 1 to 1000; 1 unless given'],
			['--rpm-max N', 'highest speed in rpm, 10 to 20000; 2000 unless given'],
			['--sees-direction', 'two sensors: it counts turns taken back by itself'],
			['--forward-is WAY', 'counter-clockwise or clockwise, seen from the top of a bobbin whose top faces out'],
			['--ease-early N', 'turns before the mark "ease off" comes, 0 to 2000; 40 unless given'],
			['--stop-early N', 'turns before the mark "stop" comes, 0 to 500; 3 unless given'],
			['--keep-after S', 'seconds after which a finished coil is kept by itself, 5 to 600; never unless given'],
			['--time-scale N', 'how much faster than a real one a simulated winder runs, 1 to 1000; 1 unless given'],
			json
		],
		work: addOneWinder
	},
	list: {
		about: 'Lists workshops, or the people and winders of one.',
		usage: '[--workshop NAME]',
		options: { workshop: { type: 'string' }, json: { type: 'boolean' } },
		help: [['--workshop NAME', 'short name of the workshop'], json],
		work: list
	}
};

async function addWorkshop(db: Db, given: Given): Promise<void> {
	const input = check(given, {
		'short-name': z
			.string()
			.regex(/^[a-z][a-z0-9-]{0,30}$/, 'lower-case letters, digits and hyphens, beginning with a letter, 31 at most'),
		name: text(80),
		'time-zone': z
			.string()
			.default(Intl.DateTimeFormat().resolvedOptions().timeZone)
			.refine(isTimeZone, 'an IANA name, such as Europe/Berlin')
	});
	const shortName = input['short-name'];
	if ((await findWorkshop(db, shortName)) !== null) {
		throw new PlainError(`There is a workshop ${shortName} already. Nothing was added; choose another short name.`);
	}
	const id = await insertWorkshop(db, { shortName, name: input.name, timeZone: input['time-zone'] });
	say(given, { workshop: id, shortName }, [
		`Added the workshop ${shortName}. Its owner comes next:`,
		`  npm run -s admin -- add-person --workshop ${shortName} --email … --name "…" --role owner`
	]);
}

async function addOnePerson(db: Db, given: Given): Promise<void> {
	const input = check(given, {
		workshop: z.string(),
		email: z.email('an address such as ada@workshop.example').max(254),
		name: text(80),
		role: z.enum(['owner', 'maker', 'apprentice'], 'owner, maker or apprentice'),
		url: z.url({ protocol: /^https?$/, error: 'an address such as https://winding-room.example' }).optional()
	});
	const workshop = await workshopOrSay(db, input.workshop);
	const password = given['password-stdin'] ? await passwordFromStdin([input.email, input.name, workshop.name]) : null;
	const { token, hash } = newToken();
	const added = await addPerson(db, workshop.id, input, hash);
	if (!added.ok) throw new PlainError(`Somebody signs in as ${input.email} already. Nobody was added.`);
	if (password !== null) {
		await setPassword(db, workshop.id, added.memberId, await hashPassword(password));
		say(given, { member: added.memberId, email: input.email }, [`Added ${input.name}, who can sign in now.`]);
		return;
	}
	const { port, tlsCert } = startEnv();
	const base = (input.url ?? `${tlsCert === null ? 'http' : 'https'}://127.0.0.1:${port}`).replace(/\/$/, '');
	const link = `${base}/first-password/${token}`;
	say(given, { member: added.memberId, email: input.email, link }, [
		`Added ${input.name}. The first password is chosen here, within ${passwordLinkDays} days; the link works once:`,
		`  ${link}`
	]);
}

async function setOnePassword(db: Db, given: Given): Promise<void> {
	const { email } = check(given, { email: z.string() });
	const person = await findSignIn(db, email);
	if (person === null) throw new PlainError(`Nobody signs in as ${email}. Nothing was changed.`);
	const password = await passwordFromStdin([email]);
	await setPassword(db, person.workshopId, person.memberId, await hashPassword(password));
	say(given, { member: person.memberId }, [
		'The password is set. Whoever was signed in with the old one is signed out.'
	]);
}

async function addOneWinder(db: Db, given: Given): Promise<void> {
	const input = check(given, {
		workshop: z.string(),
		name: text(winderLimits.nameMax),
		ppr: whole(winderLimits.pulsesPerTurn),
		'rpm-max': whole(winderLimits.rpmMax),
		'forward-is': z.enum(['counter-clockwise', 'clockwise'], 'counter-clockwise or clockwise'),
		'ease-early': whole(winderLimits.easeEarlyTurns),
		'stop-early': whole(winderLimits.stopEarlyTurns),
		'keep-after': whole(winderLimits.keepAfterS).optional(),
		'time-scale': number(winderLimits.timeScale)
	});
	const workshop = await workshopOrSay(db, input.workshop);
	const made = await inWorkshop(db, workshop.id, async (trx) => {
		const added = await addWinder(trx, workshop.id, {
			name: input.name,
			pulsesPerTurn: input.ppr,
			rpmMax: input['rpm-max'],
			seesDirection: given['sees-direction'] === true,
			forwardIs: input['forward-is'],
			easeEarlyTurns: input['ease-early'],
			stopEarlyTurns: input['stop-early'],
			keepAfterS: input['keep-after'] ?? null,
			timeScale: input['time-scale']
		});
		if (!added.ok)
			throw new PlainError(`There is a winder ${input.name} in ${input.workshop} already. Nothing was added.`);
		const linkKey = await newLinkKey(trx, workshop.id, added.winder.id);
		if (linkKey === null) throw new Error('the winder just added is not there');
		return { winder: added.winder.id, linkKey };
	});
	say(given, made, [
		`Added the winder ${input.name}. Its link key is shown this once:`,
		`  winder    ${made.winder}`,
		`  link key  ${made.linkKey}`
	]);
}

async function list(db: Db, given: Given): Promise<void> {
	if (typeof given.workshop !== 'string') {
		const workshops = await listWorkshops(db);
		say(given, workshops, [
			...workshops.map((one) => `${one.shortName.padEnd(20)}  ${one.name}  (${one.timeZone})`),
			...(workshops.length === 0 ? ['There is no workshop yet: add-workshop makes one.'] : [])
		]);
		return;
	}
	const workshop = await workshopOrSay(db, given.workshop);
	const people = await listPeople(db, workshop.id);
	const winders = await inWorkshop(db, workshop.id, (trx) => listWinders(trx, workshop.id));
	const shown = winders.map(({ id, name, hasLinkKey, linkKeyMadeAt }) => ({ id, name, hasLinkKey, linkKeyMadeAt }));
	say(given, { ...workshop, people, winders: shown }, [
		`${workshop.name} (${workshop.timeZone})`,
		...people.map(
			(one) => `  ${one.role.padEnd(10)}  ${one.email}  ${one.name}${one.hasPassword ? '' : '  (no password yet)'}`
		),
		...shown.map((one) => `  winder      ${one.name.padEnd(16)}  ${one.id}${one.hasLinkKey ? '' : '  (no link key)'}`)
	]);
}

const text = (max: number) => z.string().trim().min(1, 'some text').max(max, `${max} characters at most`);

type Range = { min: number; max: number };
const words = ({ min, max }: Range) => `from ${min} to ${max}`;
const number = (range: Range) => inRange(range, /^\d{1,6}(\.\d{1,6})?$/, `a number ${words(range)}`);
const whole = (range: Range) => inRange(range, /^\d{1,6}$/, `a whole number ${words(range)}`);
const inRange = ({ min, max }: Range, form: RegExp, says: string) =>
	z
		.string()
		.regex(form, says)
		.transform(Number)
		.refine((n) => n >= min && n <= max, says);

function isTimeZone(name: string): boolean {
	try {
		new Intl.DateTimeFormat('en', { timeZone: name });
		return true;
	} catch {
		return false;
	}
}

function check<T extends z.ZodRawShape>(given: Given, shape: T): z.output<z.ZodObject<T>> {
	const parsed = z.object(shape).safeParse(given);
	if (parsed.success) return parsed.data;
	const sentences = parsed.error.issues.map((issue) => {
		const name = String(issue.path[0]);
		if (given[name] === undefined) return `--${name} is missing.`;
		return `--${name} must be ${issue.message}, but "${given[name]}" came.`;
	});
	throw new PlainError(`${[...new Set(sentences)].join('\n')}\nNothing was changed. --help shows what belongs here.`);
}

async function workshopOrSay(db: Db, shortName: string): Promise<WorkshopRow> {
	const found = await findWorkshop(db, shortName);
	if (found !== null) return found;
	const names = (await listWorkshops(db)).map((workshop) => workshop.shortName);
	throw new PlainError(
		`There is no workshop ${shortName}. ` +
			(names.length > 0 ? `There are: ${names.join(', ')}.` : 'There is none at all yet: add-workshop makes one.')
	);
}

async function passwordFromStdin(about: string[]): Promise<string> {
	if (process.stdin.isTTY) process.stderr.write('Password (it shows while you type), then Enter: ');
	let input = '';
	for await (const chunk of process.stdin) {
		input += String(chunk);
		if (process.stdin.isTTY && input.includes('\n')) break;
	}
	const password = input.replace(/\r?\n[^]*$/, '');
	const refusal = refusePassword(password, about);
	if (refusal !== null) throw new PlainError(`${passwordRefusals[refusal]} Nothing was changed.`);
	return password;
}

function say(given: Given, data: object, lines: string[]): void {
	console.log(given.json === true ? JSON.stringify(data) : lines.join('\n'));
}

function usage(): string {
	const list = Object.entries(verbs).map(([name, verb]) => `  ${name.padEnd(14)}${verb.about}`);
	return [
		'npm run -s admin -- <verb> [options]',
		'',
		...list,
		'',
		'<verb> --help explains each. The database is the one "npm start" made here, or DATABASE_URL.'
	].join('\n');
}

function helpOf(name: string, verb: Verb): string {
	const rows = verb.help.map(([option, about]) => `  ${option.padEnd(20)}${about}`);
	return [verb.about, '', `npm run -s admin -- ${name} ${verb.usage}`, '', ...rows].join('\n');
}

async function main(args: string[]): Promise<void> {
	const [name, ...rest] = args;
	if (name === undefined || name === '--help' || name === '-h' || name === 'help') {
		console.log(usage());
		return;
	}
	const verb = Object.hasOwn(verbs, name) ? verbs[name] : undefined;
	if (verb === undefined) throw new PlainError(`There is no verb ${name}.\n\n${usage()}`);
	const given = read(rest, { ...verb.options, help: { type: 'boolean', short: 'h' } });
	if (given.help) {
		console.log(helpOf(name, verb));
		return;
	}
	const url = startEnv().databaseUrl ?? projectDatabaseUrl(projectFolder);
	if (url === null) throw new PlainError('There is no database yet: "npm start" makes one. Or set DATABASE_URL.');
	await asOwner(url, async (db) => {
		const state = await migrationState(db);
		if (!state.ok)
			throw new PlainError(`Nothing was changed: ${state.why}. "npm start" or "npm run migrate" brings it up to date.`);
		await verb.work(db, given);
	});
}

function read(args: string[], options: Options): Given {
	try {
		return parseArgs({ args, options }).values as Given;
	} catch (error) {
		throw new PlainError(`${(error as Error).message}\nNothing was changed. --help shows what belongs here.`);
	}
}

try {
	await main(process.argv.slice(2));
	// Whatever else still listens, such as standard input in a terminal, is of no more use.
	process.exit();
} catch (error) {
	sayAndFail(error);
}
