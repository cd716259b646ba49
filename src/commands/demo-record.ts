import { randomUUID } from 'node:crypto';
import { rangeFor, type MeterRange } from '../lib/coil/measurement.ts';
import { atTemperature } from '../lib/coil/wire.ts';
import { dateReadings, dateRevision, keepPastRun } from '../lib/server/db/admin.ts';
import { takeNextCoil } from '../lib/server/db/coils.ts';
import { addMeter } from '../lib/server/db/meters.ts';
import { addReading } from '../lib/server/db/readings.ts';
import { addSpec, findSpec, saveSpec, windSpec } from '../lib/server/db/specs.ts';
import { addSpool } from '../lib/server/db/spools.ts';
import type { SpecContent, SpecWire } from '../lib/spec/content.ts';
import { predictCoil } from '../lib/spec/model.ts';
import { startingSpec, tableWire } from '../lib/spec/start.ts';
import { woundCoil } from './demo-wound.ts';

/**
 * The record of the demo workshop. All of it is invented: the specs, and readings that the program's own model makes
 * plausible, scattered by figures that stand here, so that every demo is the same.
 */

type Trx = Parameters<typeof addSpec>[0];

export interface DemoPlace {
	workshopId: string;
	winderId: string;
	/** Who winds, writes and measures. */
	memberId: string;
	/** The moment the demo is made; what was wound before lies in the days before it. */
	now: Date;
}

const hourMs = 3_600_000;
const dayMs = 24 * hourMs;

/** As a sheet of accuracy of a common hand meter states it (common practice, no source). */
const meterRanges: MeterRange[] = [
	{ upToOhm: 2_000, percent: 0.8, counts: 2, ohmPerCount: 1 },
	{ upToOhm: 20_000, percent: 0.8, counts: 2, ohmPerCount: 10 },
	{ upToOhm: 200_000, percent: 0.8, counts: 2, ohmPerCount: 100 }
];

const redWire: SpecWire = { ...tableWire('awg-42', 'single'), ohmPerM: 5.44 };
const brownWire: SpecWire = tableWire('awg-42', 'heavy', 'oleoresinous');

function eveningBridge(spoolId: string): SpecContent {
	const base = startingSpec('two-coils', 'Evening bridge');
	const [screw, slug] = base.coils;
	const words = {
		start: 'through the eyelet beside the first string',
		finish: 'twice around the post, under the tape'
	};
	return {
		...base,
		strings: { spacingM: 0.0105, radiusM: 0.305 },
		mounting: 'frame, two screws',
		bobbin: { ...base.bobbin, guideStops: 'left 3.2, right 9.4' },
		wire: tableWire('awg-42', 'single'),
		spoolId,
		coils: [
			{ ...screw!, ...words, turns: 4950 },
			{ ...slug!, ...words, turns: 4850 }
		],
		magnet: { material: 'Alnico 5', shape: 'bar', charged: 'to the full', aged: '' },
		leads: { words: 'two leads and a screen', lengthM: 0.3 },
		potting: 'paraffin and beeswax, 4 to 1',
		notes: 'Warm and even. The screw coil has a hundred turns more on purpose.'
	};
}

function lanternSingle(spoolId: string): SpecContent {
	const base = startingSpec('one-coil', 'Lantern single');
	return {
		...base,
		strings: { spacingM: 0.0105, radiusM: 0.241 },
		wire: tableWire('awg-42', 'heavy', 'oleoresinous'),
		spoolId,
		coils: base.coils.map((coil) => ({
			...coil,
			turns: 7900,
			start: 'left eyelet, seen from below',
			finish: 'right eyelet'
		})),
		packing: { key: 'scatter', value: 0.82, halfWidth: 0.08, measured: false },
		magnet: { material: 'Alnico 5', shape: 'rods', charged: 'to the full', aged: 'a little, from the wide side' },
		cover: { key: 'plastic', words: 'cream' },
		potting: 'paraffin and beeswax, 4 to 1',
		notes: 'For the neck: wound loosely, so that it stays bright.'
	};
}

function wideField(): SpecContent {
	const base = startingSpec('wide-one-coil', 'Wide field');
	return {
		...base,
		strings: { spacingM: 0.0105, radiusM: null },
		coils: base.coils.map((coil) => ({ ...coil, turns: 9600, direction: 'clockwise' })),
		magnet: { material: 'Alnico 5', shape: 'bar', charged: 'to the full', aged: '' },
		notes: 'A trial. Nothing is wound of it yet.'
	};
}

/** One pickup of two coils as it was wound: how long ago, by which hand's speed, and what its readings are off by. */
interface Past {
	daysAgo: number;
	celsius: number;
	coils: readonly {
		over: number;
		rpm: number;
		ohmOff: number;
		widthOff: number | null;
		inductanceOff: number | null;
	}[];
}

/** This hand and this reel together measure a little more than the model says, and scatter by half a percent. */
const past: readonly Past[] = [
	{
		daysAgo: 9,
		celsius: 19.5,
		coils: [
			{ over: 1, rpm: 840, ohmOff: 1.0128, widthOff: 0.0002, inductanceOff: 0.94 },
			{ over: 0, rpm: 860, ohmOff: 1.0052, widthOff: null, inductanceOff: null }
		]
	},
	{
		daysAgo: 4,
		celsius: 21,
		coils: [
			{ over: 2, rpm: 900, ohmOff: 1.0083, widthOff: -0.0001, inductanceOff: 0.96 },
			{ over: -1, rpm: 920, ohmOff: 1.0111, widthOff: null, inductanceOff: null }
		]
	},
	{
		daysAgo: 2,
		celsius: 22.5,
		coils: [
			{ over: 0, rpm: 930, ohmOff: 1.0027, widthOff: 0.0001, inductanceOff: null },
			{ over: 1, rpm: 940, ohmOff: 1.0096, widthOff: 0.0003, inductanceOff: null }
		]
	}
];

/** Specs, spools, a meter and what was wound before. What is to be wound is queued by the caller, with these. */
export async function makeDemoRecord(
	trx: Trx,
	place: DemoPlace
): Promise<{ bridge: { specId: string; no: number; spoolId: string }; lantern: { specId: string; spoolId: string } }> {
	const { workshopId, memberId, now } = place;
	const spool = async (name: string, lot: string, wire: SpecWire, note: string) => {
		const added = await addSpool(trx, workshopId, { name, lot, wire, note }, memberId);
		if (!added.ok) throw new Error(`a new workshop has a spool ${name} already`);
		return added.id;
	};
	const redId = await spool('Red reel', 'HL-0311', redWire, 'Ten metres of it measured 54.4 Ω at 20 °C.');
	const brownId = await spool('Brown reel', 'HL-0298', brownWire, '');
	const meter = await addMeter(trx, workshopId, { name: 'Bench meter', ranges: meterRanges });
	if (!meter.ok) throw new Error('a new workshop has a meter already');

	const wideId = await addSpec(trx, workshopId, wideField(), memberId);
	const lanternId = await addSpec(trx, workshopId, lanternSingle(brownId), memberId);
	const bridgeId = await addSpec(trx, workshopId, eveningBridge(redId), memberId);
	const before = (days: number) => new Date(now.getTime() - days * dayMs);
	let factNo = 1;
	for (const [i, pickup] of past.entries()) {
		if (i === 1) await moreTurns(trx, place, bridgeId);
		const no = i === 0 ? 1 : 2;
		const wound = { specId: bridgeId, no, pickups: 1, spoolId: redId, by: memberId };
		const queued = await windSpec(trx, workshopId, wound);
		if (!queued.ok) throw new Error(`the demo's own spec is ${queued.why}`);
		const spec = await findSpec(trx, workshopId, bridgeId);
		if (!spec) throw new Error('the spec just added is not there');
		factNo = await keepPickup(trx, place, { pickup, content: spec.latest.content, meterId: meter.id, factNo });
	}
	await dateRevision(trx, workshopId, wideId, 1, before(12), null);
	await dateRevision(trx, workshopId, lanternId, 1, before(6), null);
	await dateRevision(trx, workshopId, bridgeId, 1, before(10), before(9.1));
	await dateRevision(trx, workshopId, bridgeId, 2, before(5), before(4.1));
	return {
		bridge: { specId: bridgeId, no: 2, spoolId: redId },
		lantern: { specId: lanternId, spoolId: brownId }
	};
}

/** Revision 2: the maker wanted more of it. */
async function moreTurns(trx: Trx, { workshopId, memberId }: DemoPlace, specId: string): Promise<void> {
	const spec = await findSpec(trx, workshopId, specId);
	if (!spec) throw new Error('the spec just added is not there');
	const { latest } = spec;
	const content = {
		...latest.content,
		coils: latest.content.coils.map((coil) => ({ ...coil, turns: coil.turns + 200 }))
	};
	const saved = await saveSpec(trx, workshopId, specId, {
		baseNo: latest.no,
		baseSavedAt: latest.savedAt,
		content,
		why: 'The first one was liked, and a little more output was asked for.',
		by: memberId,
		asNew: false
	});
	if (!saved.ok || saved.made !== 'new') throw new Error('the demo’s spec was not revised');
}

/** Takes the coils of one pickup from the head of the queue and keeps them as wound, with what was measured. */
async function keepPickup(
	trx: Trx,
	{ workshopId, winderId, memberId, now }: DemoPlace,
	{ pickup, content, meterId, factNo }: { pickup: Past; content: SpecContent; meterId: string; factNo: number }
): Promise<number> {
	let no = factNo;
	let at = now.getTime() - pickup.daysAgo * dayMs;
	for (const [i, invented] of pickup.coils.entries()) {
		const taken = await takeNextCoil(trx, workshopId, winderId, new Date(at));
		if (!taken) throw new Error('the coil just queued is not there');
		const { plan, runId } = taken;
		const wound = woundCoil({
			target: plan.target,
			lookEvery: plan.lookEvery,
			// The first coil of a session alone has its early look.
			firstLook: i === 0 ? (plan.firstLook ?? 0) : 0,
			over: invented.over,
			rpm: invented.rpm,
			memberId,
			startedAt: new Date(at + 90_000)
		});
		await keepPastRun(trx, workshopId, { ...wound, runId, coilId: plan.coilId, winderId, memberId, firstNo: no });
		no += wound.facts.length;

		const predicted = predictCoil(content, wound.figures.onBobbin, { wire: redWire });
		if (!predicted.ok) throw new Error(`the demo's spec is refused: ${predicted.field}`);
		const { resistanceOhm, outerWidthM, inductanceH } = predicted.value.figures;
		const ohm = atTemperature(resistanceOhm.value * invented.ohmOff, pickup.celsius);
		const range = rangeFor(meterRanges, ohm);
		if (!range) throw new Error('the demo’s meter does not read its coils');
		const add = async (reading: Partial<Parameters<typeof addReading>[3]>) => {
			const added = await addReading(trx, workshopId, runId, {
				id: randomUUID(),
				kind: 'resistance',
				stage: 'leads',
				value: null,
				temperatureC: null,
				temperatureHalfWidthC: null,
				meterId: null,
				meterRange: null,
				halfWidth: null,
				note: '',
				by: memberId,
				...reading
			});
			if (!added.ok) throw new Error(`the demo's reading is refused: ${added.why}`);
		};
		await add({
			// As many digits as the meter shows.
			value: Math.round(ohm / range.ohmPerCount) * range.ohmPerCount,
			temperatureC: pickup.celsius,
			temperatureHalfWidthC: 1,
			meterId,
			meterRange: range
		});
		if (invented.widthOff !== null) {
			// A caliper of a twentieth of a millimetre.
			const widthM = Math.round((outerWidthM.value + invented.widthOff) * 20_000) / 20_000;
			await add({ kind: 'outer-width', stage: 'wound', value: widthM, halfWidth: 0.0001 });
		}
		if (invented.inductanceOff !== null) {
			const value = Math.round(100 * inductanceH.value * invented.inductanceOff) / 100;
			await add({ kind: 'inductance', stage: 'assembled', value, halfWidth: 0.02 * value, note: 'At 120 Hz.' });
		}
		await dateReadings(trx, workshopId, runId, new Date(wound.endedAt.getTime() + hourMs / 2));
		at = wound.endedAt.getTime() + 10 * 60_000;
	}
	return no;
}
