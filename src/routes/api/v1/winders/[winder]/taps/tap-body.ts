import { z } from 'zod';
import { typedLine } from '$lib/typed-values';
import { lookNotes, type TapKind } from '$lib/winding/types';

/** A tap kept by a screen while the way to the server was broken is still meant a day later, and not after. */
export const tapAgeMsMax = 24 * 3_600_000;
const reasonMax = 200;
/** Far above any coil: it only keeps out what is no count at all. */
const turnsMax = 1_000_000;

const common = {
	// In one spelling: the same tap sent again must be known again.
	id: z.uuid().toLowerCase(),
	ageMs: z.number().int().min(0).max(tapAgeMsMax)
};
const bare = [
	'start',
	'start-here',
	'keep',
	'undo',
	'snapped',
	'no-snap',
	'taking-off',
	'taking-off-done',
	'jump-take',
	'jump-keep',
	'go-on',
	'stopped',
	'not-stopped',
	'this-winder',
	'other-winder'
] as const satisfies TapKind['kind'][];
/** Cleaned as the forms clean a line: PostgreSQL stores neither a NUL nor half a character. */
const reason = z.string().transform(typedLine).pipe(z.string().min(1).max(reasonMax));
const turns = z.number().int().min(0).max(turnsMax);

export const tapBody = z.discriminatedUnion('kind', [
	z.object({ ...common, kind: z.enum(bare) }),
	z.object({ ...common, kind: z.literal('look'), note: z.enum(lookNotes) }),
	z.object({ ...common, kind: z.literal('set-aside'), reason }),
	z.object({ ...common, kind: z.literal('snap-at'), turns }),
	z.object({ ...common, kind: z.literal('true-count'), turns })
]);
