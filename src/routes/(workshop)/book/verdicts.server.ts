import type { Agreement } from '../../../lib/coil/band.ts';
import type { Calibration } from '../../../lib/coil/calibrate.ts';
import type { BookLine } from '../../../lib/server/db/book.ts';
import { findRevision, keptReadings } from '../../../lib/server/db/specs.ts';
import { findSpool } from '../../../lib/server/db/spools.ts';
import type { SpecContent, SpecWire } from '../../../lib/spec/content.ts';
import { expectedCoil, readAt20C, verdictOf } from '../../../lib/spec/judged.ts';
import { resistanceSays } from '../../../lib/spec/kept.ts';

/** What the lines of the bench book measured, against what was expected of them. Ohms at 20 °C, ± as standard uncertainties. */

export interface LineVerdict {
	/** null: nothing was read. `ohm` null: open. */
	measured: { ohm: number | null; uncertaintyOhm: number } | null;
	predicted: Predicted | null;
	agreement: Agreement | null;
}

interface Predicted {
	ohm: number;
	uncertaintyOhm: number;
}

type Trx = Parameters<typeof findSpool>[0];

/** What coils of one revision and spool have in common. */
interface Known {
	content: SpecContent;
	wire: SpecWire | null;
	/** Runs of the kept coils that teach. */
	taught: ReadonlySet<string>;
	/** The calibration for a run of `taught`; null: for any other. */
	calibrationFor: (runId: string | null) => Calibration | null;
	/** By turns on the bobbin, for coils that are not among `taught`: they are all expected alike. */
	alike: Map<number, Predicted | null>;
}

/** After so many lines whoever else waits for this process has a turn. */
const linesAtOnce = 20;

/** One verdict for each line, in their order; a coil never speaks for itself. */
export async function verdictsOf(trx: Trx, workshopId: string, lines: readonly BookLine[]): Promise<LineVerdict[]> {
	const verdicts: LineVerdict[] = new Array(lines.length);
	let done = 0;
	// One revision and spool after another: each is read once and forgotten, however many there are.
	for (const places of placesByGroup(lines).values()) {
		const known = await knownOf(trx, workshopId, lines[places[0]!]!);
		for (const i of places) {
			verdicts[i] = verdictOfLine(lines[i]!, known);
			if (++done % linesAtOnce === 0) await new Promise((resolve) => setImmediate(resolve));
		}
	}
	return verdicts;
}

function placesByGroup(lines: readonly BookLine[]): Map<string, number[]> {
	const groups = new Map<string, number[]>();
	for (const [i, { spec, spoolId }] of lines.entries()) {
		const key = spec ? `${spec.id} ${spec.no} ${spoolId}` : '';
		const places = groups.get(key);
		if (places) places.push(i);
		else groups.set(key, [i]);
	}
	return groups;
}

async function knownOf(trx: Trx, workshopId: string, { spec, spoolId }: BookLine): Promise<Known | null> {
	const revision = spec && (await findRevision(trx, workshopId, spec.id, spec.no));
	if (!revision) return null;
	const { content } = revision;
	const wire = spoolId === null ? null : ((await findSpool(trx, workshopId, spoolId))?.wire ?? null);
	const kept = await keptReadings(trx, workshopId, { bobbinName: content.bobbin.name, spoolId });
	const says = resistanceSays(content, wire, kept);
	const all = says(null);
	return {
		content,
		wire,
		taught: new Set([...all.used, ...all.leftOut].map(({ runId }) => runId)),
		calibrationFor: (runId) => (runId === null ? all : says(runId)).calibration,
		alike: new Map()
	};
}

function verdictOfLine(line: BookLine, known: Known | null): LineVerdict {
	const at = line.read && readAt20C(line.read);
	const open = line.read !== null && line.read.ohm === null;
	const measured = at?.ok
		? at.value
			? { ohm: at.value.ohm, uncertaintyOhm: at.value.uncertaintyOhm }
			: { ohm: null, uncertaintyOhm: 0 }
		: null;
	const predicted = known && line.onBobbin >= 1 ? predictedOf(line, known) : null;
	const verdict = line.read && predicted && verdictOf(line.read, predicted);
	return { measured, predicted, agreement: verdict?.ok ? verdict.value.agreement : open ? 'open' : null };
}

function predictedOf({ id, onBobbin }: BookLine, known: Known): Predicted | null {
	const { content, wire, taught, calibrationFor, alike } = known;
	const predict = (runId: string | null): Predicted | null => {
		const by = expectedCoil(content, onBobbin, { wire, calibration: calibrationFor(runId) });
		return by.ok ? { ohm: by.value.ohm, uncertaintyOhm: by.value.uncertaintyOhm } : null;
	};
	if (taught.has(id)) return predict(id);
	if (!alike.has(onBobbin)) alike.set(onBobbin, predict(null));
	return alike.get(onBobbin) ?? null;
}
