import { existsSync, mkdirSync } from 'node:fs';
import { cpus, loadavg, release, totalmem } from 'node:os';
import { resolve } from 'node:path';
import { parseArgs } from 'node:util';
import { sql } from 'kysely';
import { ensureBuilt } from '../../src/commands/build.ts';
import { PlainError } from '../../src/commands/plain-error.ts';
import { measureDurable } from './measure-durable.ts';
import { measureExit } from './measure-exit.ts';
import { measureInductance } from './measure-inductance.ts';
import { levels, measureLatency } from './measure-latency.ts';
import { measureMemory } from './measure-memory.ts';
import { Report } from './report.ts';
import { prepareGround, type Ground } from './workshop.ts';

const help = `Measures the built server beside references in the same run, and prints Markdown.

  npm run bench -- [--quick] [--only latency|durable|memory|exit|inductance] [--winders 1|20|100] [--profile folder]

  --quick    fewer and shorter rounds: a look, no figures to keep
  --only     one of the five measurements; may be given more than once
  --winders  latency with so many alone; may be given more than once
  --profile  writes what the server spends its time on into a folder (.cpuprofile, which slows it)

It takes some four minutes. Nothing else should run on the machine meanwhile.`;

const measurements = {
	latency: measureLatency,
	durable: measureDurable,
	memory: measureMemory,
	exit: measureExit,
	inductance: measureInductance
};
type Name = keyof typeof measurements;

async function main(): Promise<void> {
	const { values } = parseArgs({
		options: {
			help: { type: 'boolean', default: false },
			quick: { type: 'boolean', default: false },
			only: { type: 'string', multiple: true, default: [] },
			winders: { type: 'string', multiple: true, default: [] },
			profile: { type: 'string' }
		}
	});
	if (values.help) return console.log(help);
	const unknown = values.only.find((name) => !Object.hasOwn(measurements, name));
	if (unknown !== undefined) {
		throw new PlainError(`--only knows ${Object.keys(measurements).join(', ')}, but "${unknown}" came.`);
	}
	const winders = values.winders.map(Number);
	const known = levels.map((level) => level.winders);
	if (!winders.every((number) => known.includes(number))) {
		throw new PlainError(`--winders knows ${known.join(', ')}, but "${values.winders.join(' ')}" came.`);
	}
	const names = Object.keys(measurements).filter((name) => values.only.length === 0 || values.only.includes(name));
	const profile = values.profile === undefined ? null : resolve(values.profile);
	if (profile !== null && !existsSync(profile)) mkdirSync(profile, { recursive: true });

	// Progress goes beside the tables, so that these can be sent to a file.
	const report = new Report((text) => console.error(`  ${text}`));
	if ((await ensureBuilt()) === 'built') report.say('built first: the sources had changed');
	const load = loadavg()[0] ?? 0;
	if (load > 0.5) {
		report.note(`The machine was busy when this began (load ${load.toFixed(1)}): these figures are no ones to keep.`);
	}
	const began = performance.now();
	const ground = await prepareGround();
	try {
		const about = await machine(ground);
		for (const name of names)
			await measurements[name as Name](ground, report, { quick: values.quick, profile, winders });
		report.say(`took ${Math.round((performance.now() - began) / 1000)} s`);
		console.log(report.markdown(about));
	} finally {
		await ground.remove();
	}
}

/** What the figures belong to. */
async function machine(ground: Ground): Promise<string> {
	const { database } = await ground.newWorkshop();
	const { rows } = await sql<{ version: string }>`select current_setting('server_version') as version`.execute(
		database.owner
	);
	const cores = cpus();
	const model = cores[0]?.model.trim().replace(/\s+/g, ' ') ?? 'unknown processor';
	const memoryGb = Math.round(totalmem() / 1e9);
	return (
		`Measured ${new Date().toISOString().slice(0, 10)} on ${cores.length} cores of ${model}, ${memoryGb} GB, ` +
		`Linux ${release()}, Node ${process.version}, PostgreSQL ${rows[0]?.version ?? 'unknown'}, by \`npm run bench\`.`
	);
}

try {
	await main();
	process.exit();
} catch (error) {
	console.error(error instanceof PlainError ? error.message : error);
	process.exit(1);
}
