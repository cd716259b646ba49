import type { UnitPreference } from '$lib/coil/units';
import { inWorkshop } from '$lib/server/db/connect';
import { findSpool, listSpools } from '$lib/server/db/spools';
import { keptReadings, listSpecs } from '$lib/server/db/specs';
import type { KeptReading } from '$lib/spec/kept';
import type { SpecContent, SpecWire } from '$lib/spec/content';

type Trx = Parameters<Parameters<typeof inWorkshop>[2]>[0];

/** What stands beside a spec's own fields: where to take a bobbin or a wire from, and what was measured before. */
export interface EditorData {
	units: UnitPreference;
	/** Those on the shelf, and the spec's own where that has ended. */
	spools: { id: string; name: string; wire: SpecWire; ended: boolean }[];
	/** Kept coils of this bobbin and spool. */
	kept: KeptReading[];
	/** Other specs, the one saved last first: their bobbins to take, their response to compare. */
	others: { id: string; name: string; content: SpecContent }[];
}

export async function editorData(
	trx: Trx,
	{ workshopId, units }: { workshopId: string; units: UnitPreference },
	content: SpecContent,
	specId: string | null
): Promise<EditorData> {
	const shelf = await listSpools(trx, workshopId);
	const chosen = content.spoolId === null ? null : await findSpool(trx, workshopId, content.spoolId);
	const spools = chosen?.endedAt ? [...shelf, chosen] : shelf;
	return {
		units,
		spools: spools.map(({ id, name, wire, endedAt }) => ({ id, name, wire, ended: endedAt !== null })),
		kept: await keptReadings(trx, workshopId, { bobbinName: content.bobbin.name, spoolId: content.spoolId }),
		others: (await listSpecs(trx, workshopId))
			.filter(({ id }) => id !== specId)
			.map(({ id, name, content: of }) => ({ id, name, content: of }))
	};
}

/** A spool that was chosen is still there; null: none was. The sentence for its field where it is not. */
export async function spoolRefused(trx: Trx, workshopId: string, content: SpecContent): Promise<string | null> {
	if (content.spoolId === null || (await findSpool(trx, workshopId, content.spoolId))) return null;
	return 'Spool: there is no such spool in this workshop; choose another, or none yet. The rest was kept as typed.';
}
