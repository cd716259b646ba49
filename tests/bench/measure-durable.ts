import { Agent } from 'node:http';
import { sql, type Kysely } from 'kysely';
import type { Database } from '../../src/lib/server/db/schema.ts';
import { formatLine } from '../../src/lib/turnline/index.ts';
import { post, serverPlaces, type Places } from './fleet.ts';
import type { Options } from './options.ts';
import { startServer } from './programs.ts';
import type { Report } from './report.ts';
import { figure, median } from './statistics.ts';
import type { BenchWinder, Ground } from './workshop.ts';

/** One batch a winder: the limits on lines allow 600 at once and then 20 a second, so each winder sends once. */
const linesPerBatch = 500;
const windersPerRound = 48;
const sendersAtOnce = 12;
const aim = 0.5;
/** A line a second on the device's clock: none of them is thinned. */
const lineEveryMs = 1_000;

interface Spool {
	winder: BenchWinder;
	boot: string;
	/** Where the winder is now, and what it kept while it had no link. */
	hi: string;
	lines: string[];
	rows: Row[];
}

interface Row {
	n: number;
	f: number;
	t: number;
}

/** Lines a second that are on disk before they are answered, beside a plain insert of the same rows. */
export async function measureDurable(ground: Ground, report: Report, { quick, profile }: Options) {
	const rounds = quick ? 2 : 4;
	const workshop = await ground.newWorkshop();
	const { owner } = workshop.database;
	const winders = await workshop.addWinders(windersPerRound * (rounds + 1));
	const places = (port: number) => serverPlaces(port, winders);
	const server = await startServer(workshop.database.url, { profileFolder: profile });
	const agents = Array.from({ length: sendersAtOnce }, () => new Agent({ keepAlive: true, maxSockets: 1 }));
	const own: number[] = [];
	const plain: number[] = [];
	try {
		// The first round warms up and does not count.
		for (let round = 0; round <= rounds; round += 1) {
			const first = round * windersPerRound;
			const spools = winders.slice(first, first + windersPerRound).map((winder, i) => makeSpool(winder, first + i));
			const linesPerS = await sendAll(spools, first, places(server.port), agents);
			await checkStored(owner, workshop.id, spools);
			const plainLinesPerS = await insertAll(owner, workshop.id, spools);
			if (round === 0) continue;
			own.push(linesPerS);
			plain.push(plainLinesPerS);
		}
	} finally {
		for (const agent of agents) agent.destroy();
		await server.stop();
	}
	const ratios = own.map((linesPerS, i) => linesPerS / (plain[i] ?? 0));
	report.durable({
		linesPerS: median(own),
		plainLinesPerS: median(plain),
		ratio: median(ratios),
		ratios,
		lines: windersPerRound * linesPerBatch,
		rounds,
		aim
	});
	report.say(`durable: ${figure(median(own))} lines/s, plain insert ${figure(median(plain))} lines/s`);
}

function makeSpool(winder: BenchWinder, number: number): Spool {
	const boot = (0xb0000000 + number).toString(16).toUpperCase();
	const rows = Array.from({ length: linesPerBatch }, (_, i) => ({ n: i + 1, f: i * 10, t: (i + 1) * lineEveryMs }));
	const last = rows.at(-1) as Row;
	const hi = formatLine({
		verb: 'HI',
		p: 1,
		dev: 'w-bench',
		b: boot,
		n: last.n,
		e: 0,
		f: last.f,
		v: 0,
		t: last.t + lineEveryMs,
		ppr: 1,
		dir: 1,
		rep: 100,
		buf: 512
	});
	const lines = rows.map(({ n, f, t }) => formatLine({ verb: 'T', b: boot, n, e: 0, f, v: 0, r: 600, t }));
	return { winder, boot, hi, lines, rows };
}

/** Several winders at once, each batch answered before the sender takes the next. */
async function sendAll(spools: Spool[], first: number, places: Places, agents: Agent[]): Promise<number> {
	const send = async (number: number, lines: string[], agent: Agent) => {
		const { status, body } = await post(places, first + number, lines, agent);
		if (status !== 200) throw new Error(`a batch was answered with ${status}: ${body}`);
		return JSON.parse(body) as { stored: number };
	};
	const inTurn = async (work: (spool: Spool, number: number, agent: Agent) => Promise<void>) => {
		let next = 0;
		await Promise.all(
			agents.map(async (agent) => {
				for (let number = next++; number < spools.length; number = next++) {
					await work(spools[number] as Spool, number, agent);
				}
			})
		);
	};
	// Each winder is known and its seat in memory, as it is when a link comes back.
	await inTurn(async ({ hi }, number, agent) => void (await send(number, [hi], agent)));
	const from = performance.now();
	await inTurn(async ({ lines }, number, agent) => {
		const { stored } = await send(number, lines, agent);
		if (stored !== lines.length) throw new Error(`${stored} of ${lines.length} lines were stored`);
	});
	return (spools.length * linesPerBatch) / ((performance.now() - from) / 1000);
}

/** What was answered is there. */
async function checkStored(db: Kysely<Database>, workshopId: string, spools: Spool[]): Promise<void> {
	const { lines } = await db
		.selectFrom('kept_line')
		.select((row) => row.fn.countAll<number>().as('lines'))
		.where('workshop_id', '=', workshopId)
		.where(
			'boot',
			'in',
			spools.map(({ boot }) => boot)
		)
		.executeTakeFirstOrThrow();
	const sent = spools.length * linesPerBatch;
	if (lines !== sent) throw new Error(`${lines} of ${sent} lines answered for are on disk`);
}

/** The same rows into the same table by one statement a batch, each its own transaction, as another boot of each winder. */
async function insertAll(db: Kysely<Database>, workshopId: string, spools: Spool[]): Promise<number> {
	const from = performance.now();
	for (const { winder, boot, rows } of spools) {
		const other = boot.replace('B', 'A');
		await sql`
			insert into kept_line (workshop_id, winder_id, boot, n, e, k, f, v, r, t, x, g, received_at)
			select ${workshopId}::uuid, row.winder_id, row.boot, row.n, row.e, row.k, row.f, row.v, row.r, row.t, row.x,
				row.g, to_timestamp(row.received_ms / 1000.0)
			from unnest(
				${rows.map(() => winder.id)}::uuid[], ${rows.map(() => other)}::text[], ${rows.map(({ n }) => n)}::bigint[],
				${rows.map(() => 0)}::bigint[], ${rows.map(() => null)}::text[], ${rows.map(({ f }) => f)}::bigint[],
				${rows.map(() => 0)}::bigint[], ${rows.map(() => 600)}::integer[], ${rows.map(({ t }) => t)}::bigint[],
				${rows.map(() => null)}::bigint[], ${rows.map(() => null)}::bigint[], ${rows.map(() => Date.now())}::bigint[]
			) as row (winder_id, boot, n, e, k, f, v, r, t, x, g, received_ms)`.execute(db);
	}
	return (spools.length * linesPerBatch) / ((performance.now() - from) / 1000);
}
