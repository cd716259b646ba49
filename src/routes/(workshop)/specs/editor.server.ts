import type { UnitPreference } from '$lib/coil/units';
import { inWorkshop } from '$lib/server/db/connect';
import { findSpool, listSpools } from '$lib/server/db/spools';
import { keptReadings, listSpecChoices, type SpecChoice } from '$lib/server/db/specs';
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
	/** Other specs, the one saved last first: what they say is asked for when one is compared. */
	others: { id: string; name: string }[];
	/** The workshop's own bobbins as other specs have them, each name once; `id` of the spec. */
	bobbins: { id: string; bobbin: SpecContent['bobbin'] }[];
}

export async function editorData(
	trx: Trx,
	{ workshopId, units }: { workshopId: string; units: UnitPreference },
	content: SpecContent,
	specId: string | null
): Promise<EditorData> {
	const others = (await listSpecChoices(trx, workshopId)).filter(({ id }) => id !== specId);
	const shelf = await listSpools(trx, workshopId);
	const chosen = content.spoolId === null ? null : await findSpool(trx, workshopId, content.spoolId);
	const spools = chosen?.endedAt ? [...shelf, chosen] : shelf;
	return {
		units,
		spools: spools.map(({ id, name, wire, endedAt }) => ({ id, name, wire, ended: endedAt !== null })),
		kept: await keptReadings(trx, workshopId, { bobbinName: content.bobbin.name, spoolId: content.spoolId }),
		others: others.map(({ id, name }) => ({ id, name })),
		bobbins: ownBobbins(others)
	};
}

function ownBobbins(specs: readonly SpecChoice[]): EditorData['bobbins'] {
	const byName = new Map<string, EditorData['bobbins'][number]>();
	for (const { id, bobbin } of specs) {
		const key = bobbin.name.trim().toLowerCase();
		if (bobbin.generic === null && !byName.has(key)) byName.set(key, { id, bobbin });
	}
	return [...byName.values()];
}

/** A spool that was chosen is still there; null: none was. The sentence for its field where it is not. */
export async function spoolRefused(trx: Trx, workshopId: string, content: SpecContent): Promise<string | null> {
	// In the one spelling of its id: pages find it by that.
	if (content.spoolId === null || (await findSpool(trx, workshopId, content.spoolId))?.id === content.spoolId)
		return null;
	return 'Spool: there is no such spool in this workshop; choose another, or none yet. The rest was kept as typed.';
}
