import { calibrate, type Calibration } from '../../../lib/coil/calibrate.ts';
import type { Agreement } from '../../../lib/coil/band.ts';
import type { BookLine } from '../../../lib/server/db/book.ts';
import { findRevision, keptReadings } from '../../../lib/server/db/specs.ts';
import { findSpool } from '../../../lib/server/db/spools.ts';
import type { SpecContent, SpecWire } from '../../../lib/spec/content.ts';
import { expectedCoil, readAt20C, verdictOf } from '../../../lib/spec/judged.ts';
import { calibrationOf, type KeptSay } from '../../../lib/spec/kept.ts';
import { specModel } from '../../../lib/spec/model.ts';

/** What the lines of the bench book measured, against what was expected of them. Ohms at 20 °C, ± as standard uncertainties. */

export interface LineVerdict {
	/** null: nothing was read. `ohm` null: open. */
	measured: { ohm: number | null; uncertaintyOhm: number } | null;
	predicted: { ohm: number; uncertaintyOhm: number } | null;
	agreement: Agreement | null;
}

type Trx = Parameters<typeof findSpool>[0];

interface Known {
	content: SpecContent;
	wire: SpecWire | null;
	say: KeptSay;
}

/** After so many lines whoever else waits for this process has a turn. */
const linesAtOnce = 50;

/** One verdict for each line, in their order; a coil never speaks for itself. */
export async function verdictsOf(trx: Trx, workshopId: string, lines: readonly BookLine[]): Promise<LineVerdict[]> {
	const known = new Map<string, Known | null>();
	const verdicts: LineVerdict[] = [];
	for (const [i, line] of lines.entries()) {
		const key = line.spec && `${line.spec.id} ${line.spec.no} ${line.spoolId}`;
		if (key !== null && !known.has(key)) known.set(key, await knownOf(trx, workshopId, line));
		verdicts.push(verdictOfLine(line, (key !== null && known.get(key)) || null));
		if (i % linesAtOnce === linesAtOnce - 1) await new Promise((resolve) => setImmediate(resolve));
	}
	return verdicts;
}

async function knownOf(trx: Trx, workshopId: string, { spec, spoolId }: BookLine): Promise<Known | null> {
	const revision = spec && (await findRevision(trx, workshopId, spec.id, spec.no));
	if (!revision) return null;
	const { content } = revision;
	const wire = spoolId === null ? null : ((await findSpool(trx, workshopId, spoolId))?.wire ?? null);
	const kept = await keptReadings(trx, workshopId, { bobbinName: content.bobbin.name, spoolId });
	return { content, wire, say: calibrationOf(content, wire, kept) };
}

function verdictOfLine(line: BookLine, known: Known | null): LineVerdict {
	const at = line.read && readAt20C(line.read);
	const open = line.read !== null && line.read.ohm === null;
	const measured = at?.ok
		? at.value
			? { ohm: at.value.ohm, uncertaintyOhm: at.value.uncertaintyOhm }
			: { ohm: null, uncertaintyOhm: 0 }
		: null;
	const without = { measured, predicted: null, agreement: open ? ('open' as const) : null };
	if (!known || line.onBobbin < 1) return without;
	const { content, wire, say } = known;
	const expected = expectedCoil(content, line.onBobbin, { wire, calibration: calibrationWithout(known, line.id, say) });
	if (!expected.ok) return without;
	const verdict = line.read && verdictOf(line.read, expected.value);
	return {
		measured,
		predicted: { ohm: expected.value.ohm, uncertaintyOhm: expected.value.uncertaintyOhm },
		agreement: verdict?.ok ? verdict.value.agreement : without.agreement
	};
}

function calibrationWithout({ content, wire }: Known, runId: string, say: KeptSay): Calibration | null {
	const own = say.used.findIndex((coil) => coil.runId === runId);
	if (!say.calibration || own < 0) return say.calibration;
	const others = say.calibration.kept.toSpliced(own, 1);
	const fitted = others.length > 0 ? calibrate(specModel(content, wire), others) : null;
	return fitted?.ok ? fitted.value : null;
}
