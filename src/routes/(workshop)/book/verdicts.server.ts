import type { Agreement } from '../../../lib/coil/band.ts';
import type { Calibration } from '../../../lib/coil/calibrate.ts';
import type { BookLine } from '../../../lib/server/db/book.ts';
import { findRevision, keptReadings } from '../../../lib/server/db/specs.ts';
import { findSpool } from '../../../lib/server/db/spools.ts';
import type { SpecContent, SpecWire } from '../../../lib/spec/content.ts';
import { expectedCoil, readAt20C, verdictOf } from '../../../lib/spec/judged.ts';
import { keptWithout, resistanceSay, type KeptReading } from '../../../lib/spec/kept.ts';

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
	kept: readonly KeptReading[];
	calibration: Calibration | null;
	/** By turns on the bobbin, of coils that are not among `kept`: they are all expected alike. */
	expected: Map<number, Predicted | null>;
}

/** After so many lines whoever else waits for this process has a turn. */
const linesAtOnce = 20;
/** Revisions with a spool that are kept in mind, some 100 kB each: lines of one stand together in a book sorted by date. */
const knownMax = 50;

/** One verdict for each line, in their order; a coil never speaks for itself. */
export async function verdictsOf(trx: Trx, workshopId: string, lines: readonly BookLine[]): Promise<LineVerdict[]> {
	const known = new Map<string, Known | null>();
	const verdicts: LineVerdict[] = [];
	for (const [i, line] of lines.entries()) {
		verdicts.push(verdictOfLine(line, await knownOf(trx, workshopId, line, known)));
		if (i % linesAtOnce === linesAtOnce - 1) await new Promise((resolve) => setImmediate(resolve));
	}
	return verdicts;
}

async function knownOf(
	trx: Trx,
	workshopId: string,
	{ spec, spoolId }: BookLine,
	known: Map<string, Known | null>
): Promise<Known | null> {
	if (!spec) return null;
	const key = `${spec.id} ${spec.no} ${spoolId}`;
	const before = known.get(key);
	const found = before === undefined ? await readKnown(trx, workshopId, spec, spoolId) : before;
	// What was asked for last stands last, so that the first is the one nobody asked for longest.
	known.delete(key);
	known.set(key, found);
	if (known.size > knownMax) known.delete(known.keys().next().value!);
	return found;
}

async function readKnown(
	trx: Trx,
	workshopId: string,
	spec: NonNullable<BookLine['spec']>,
	spoolId: string | null
): Promise<Known | null> {
	const revision = await findRevision(trx, workshopId, spec.id, spec.no);
	if (!revision) return null;
	const { content } = revision;
	const wire = spoolId === null ? null : ((await findSpool(trx, workshopId, spoolId))?.wire ?? null);
	const kept = await keptReadings(trx, workshopId, { bobbinName: content.bobbin.name, spoolId });
	return { content, wire, kept, calibration: resistanceSay(content, wire, kept).calibration, expected: new Map() };
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
	const { content, wire, kept, expected } = known;
	const others = keptWithout(kept, id);
	const predict = (calibration: Calibration | null): Predicted | null => {
		const by = expectedCoil(content, onBobbin, { wire, calibration });
		return by.ok ? { ohm: by.value.ohm, uncertaintyOhm: by.value.uncertaintyOhm } : null;
	};
	if (others !== kept) return predict(resistanceSay(content, wire, others).calibration);
	let alike = expected.get(onBobbin);
	if (alike === undefined) {
		alike = predict(known.calibration);
		expected.set(onBobbin, alike);
	}
	return alike;
}
