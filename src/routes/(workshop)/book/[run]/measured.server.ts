import type { Expected, Verdict } from '../../../../lib/coil/band.ts';
import { difference, rectangular, type At20C } from '../../../../lib/coil/measurement.ts';
import type { Refused } from '../../../../lib/coil/refuse.ts';
import type { Uncertain } from '../../../../lib/coil/uncertainty.ts';
import { to20C } from '../../../../lib/coil/wire.ts';
import { listReadings, neighboursOf, type Reading } from '../../../../lib/server/db/readings.ts';
import type { Run } from '../../../../lib/server/db/runs.ts';
import { findRevision, keptReadings } from '../../../../lib/server/db/specs.ts';
import { findSpool, listSpools } from '../../../../lib/server/db/spools.ts';
import type { SpecContent, SpecWire } from '../../../../lib/spec/content.ts';
import {
	expectedCoil,
	nextStep,
	packingOf,
	permeabilityOf,
	readAt20C,
	sideOf,
	verdictOf,
	type ExpectedCoil,
	type Side
} from '../../../../lib/spec/judged.ts';
import { resistanceSays, type KeptReading, type KeptSay, type LeftOutWhy } from '../../../../lib/spec/kept.ts';
import { predictCoil } from '../../../../lib/spec/model.ts';

/** Everything a run's page says of what its coil should measure, and of what it did. SI. */

export type MeasuredReading = Omit<Reading, 'runId' | 'meterId' | 'meterRange'> & {
	/** How far the value as read may be off: a standard uncertainty. */
	uncertainty: number;
	/** A resistance brought to 20 °C; null: open, or no resistance. */
	at20C: At20C | null;
	/** null: nothing to compare with. */
	verdict: Verdict | null;
	next: string | null;
	/** Of a width and an inductance: against the predicted one. */
	side: Side | null;
	/** What a width says the packing is, what an inductance says of the cores; null: nothing explains it. */
	means: number | null;
};

export interface Difference {
	runId: string;
	name: string;
	sticker: string | null;
	turns: number | null;
	stage: Reading['stage'];
	ohmAt20C: number;
	/** This coil's less that one's. */
	ohm: number;
	uncertaintyOhm: number;
}

type Trx = Parameters<typeof listReadings>[0];

/** So many nearest coils are compared. */
const differencesMax = 4;

export async function measuredOf(trx: Trx, workshopId: string, run: Run) {
	const revision = run.spec && (await findRevision(trx, workshopId, run.spec.id, run.spec.no));
	const spool = run.spoolId === null ? null : await findSpool(trx, workshopId, run.spoolId);
	const content = revision?.content ?? null;
	const wire = spool?.wire ?? null;
	const turns = run.onBobbin;
	const taken = await listReadings(trx, workshopId, run.id);

	const kept =
		content && (await keptReadings(trx, workshopId, { bobbinName: content.bobbin.name, spoolId: run.spoolId }));
	const { expected, outerWidthM, inductanceH, ...said } =
		content && kept && turns !== null && turns >= 1
			? expectationOf(content, wire, turns, kept, run.id)
			: nothingExpected;

	const readings = taken.map((reading): MeasuredReading => {
		const { runId: _run, meterId: _meter, meterRange, ...told } = reading;
		const none = { at20C: null, verdict: null, next: null, side: null, means: null };
		const half = rectangular(reading.halfWidth ?? 0);
		if (reading.kind === 'resistance') {
			const read = {
				ohm: reading.value,
				temperatureC: reading.temperatureC ?? 20,
				temperatureHalfWidthC: reading.temperatureHalfWidthC ?? 0,
				range: meterRange,
				halfWidthOhm: reading.halfWidth
			};
			const at = readAt20C(read);
			const verdict = expected && verdictOf(read, expected);
			const found = verdict?.ok ? verdict.value : openOf(reading);
			return {
				...told,
				...none,
				uncertainty: half,
				at20C: at.ok ? at.value : null,
				verdict: found,
				next: found && nextStep(found.agreement, reading.stage)
			};
		}
		const predicted = reading.kind === 'outer-width' ? outerWidthM : inductanceH;
		const means = reading.kind === 'outer-width' ? packingOf : permeabilityOf;
		const meant =
			content && turns !== null && reading.value !== null ? means(content, wire, turns, reading.value) : null;
		return {
			...told,
			...none,
			uncertainty: half,
			side: predicted && reading.value !== null ? sideOf(reading.value, half, predicted) : null,
			means: meant?.ok ? meant.value : null
		};
	});

	const spools = await listSpools(trx, workshopId);
	return {
		spec:
			revision && run.spec
				? { id: run.spec.id, no: run.spec.no, name: revision.name, coils: revision.content.coils.length }
				: null,
		solders: content ? (wire ?? content.wire).material : null,
		spool: spool && { id: spool.id, name: spool.name, lot: spool.lot },
		spools: [...spools, ...(spool && spool.endedAt ? [spool] : [])].map(({ id, name, lot }) => ({ id, name, lot })),
		expected: expected && {
			ohm: expected.ohm,
			uncertaintyOhm: expected.uncertaintyOhm,
			fromOhm: expected.fromOhm,
			toOhm: expected.toOhm,
			parts: expected.parts
		},
		...said,
		outerWidthM: outerWidthM && { value: outerWidthM.value, uncertainty: outerWidthM.uncertainty },
		inductanceH: inductanceH && { value: inductanceH.value, uncertainty: inductanceH.uncertainty },
		readings,
		differences: await differencesOf(trx, workshopId, run, taken)
	};
}

interface Expectation {
	expected: ExpectedCoil | null;
	/** Without what the kept coils say; null: they say nothing. */
	plain: Expected | null;
	/** Why nothing can be expected. */
	refused: Refused | null;
	calibration: {
		scale: number;
		uncertainty: number;
		used: { runId: string; sticker: string; turns: number; ratio: number; share: number }[];
	} | null;
	/** Other kept coils that were measured and teach this one nothing. */
	leftOut: KeptSay['leftOut'];
	/** Why this coil teaches the others nothing; null: it does, or is not asked to. */
	teachesNot: LeftOutWhy | null;
	outerWidthM: Pick<Uncertain, 'value' | 'uncertainty'> | null;
	inductanceH: Pick<Uncertain, 'value' | 'uncertainty'> | null;
}

const nothingExpected: Expectation = {
	expected: null,
	plain: null,
	refused: null,
	calibration: null,
	leftOut: [],
	teachesNot: null,
	outerWidthM: null,
	inductanceH: null
};

/** What a coil of so many turns should measure, by the model and by what the others say: a coil never speaks for itself. */
function expectationOf(
	content: SpecContent,
	wire: SpecWire | null,
	turns: number,
	kept: readonly KeptReading[],
	runId: string
): Expectation {
	const says = resistanceSays(content, wire, kept);
	const { calibration, used, leftOut } = says(runId);
	const by = expectedCoil(content, turns, { wire, calibration });
	const without = calibration && expectedCoil(content, turns, { wire });
	const all = predictCoil(content, turns, { wire });
	return {
		expected: by.ok ? by.value : null,
		plain: without?.ok ? { ohm: without.value.ohm, uncertaintyOhm: without.value.uncertaintyOhm } : null,
		refused: by.ok ? null : by,
		calibration: calibration && {
			scale: calibration.scale,
			uncertainty: calibration.uncertainty,
			used: used.map(({ runId: id, sticker, turns: wound, ratio, share }) => ({
				runId: id,
				sticker,
				turns: wound,
				ratio,
				share
			}))
		},
		leftOut: leftOut.filter(({ why }) => why !== 'no-resistance'),
		teachesNot: says(null).leftOut.find((coil) => coil.runId === runId)?.why ?? null,
		outerWidthM: all.ok ? all.value.figures.outerWidthM : null,
		inductanceH: all.ok ? all.value.figures.inductanceH : null
	};
}

/** Beyond every range is open whatever was expected. */
const openOf = ({ value }: Reading): Verdict | null =>
	value === null ? { agreement: 'open', deviation: null, ofBand: null } : null;

async function differencesOf(trx: Trx, workshopId: string, run: Run, taken: readonly Reading[]) {
	const mine = taken.find(
		({ kind, struckAt, value, meterId, meterRange }) =>
			kind === 'resistance' && struckAt === null && value !== null && meterId !== null && meterRange !== null
	);
	if (!mine?.meterId || !mine.meterRange || mine.value === null || !run.spec || !run.endedAt) return null;
	const { meterId, meterRange: range } = mine;
	const neighbours = await neighboursOf(
		trx,
		workshopId,
		{ id: run.id, spec: run.spec, endedAt: run.endedAt },
		{ id: meterId, range },
		differencesMax
	);
	const own = { ohm: mine.value, temperatureC: mine.temperatureC ?? 20 };
	const differences = neighbours.flatMap((other): Difference[] => {
		const half = Math.max(mine.temperatureHalfWidthC ?? 0, other.temperatureHalfWidthC);
		const apart = difference(own, other, half, range);
		if (!apart.ok) return [];
		const { runId, name, sticker, turns, stage } = other;
		return [{ runId, name, sticker, turns, stage, ohmAt20C: to20C(other.ohm, other.temperatureC), ...apart.value }];
	});
	return differences.length === 0 ? null : { meterName: mine.meterName, stage: mine.stage, differences };
}
