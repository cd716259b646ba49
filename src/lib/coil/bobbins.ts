import type { Bobbin } from './winding.ts';

/** Where a spec may start from. Generic figures from memory, of no maker's part; every one may be edited. */
export interface GenericBobbin {
	key: string;
	name: string;
	bobbin: Bobbin;
	/** How it is usually packed. */
	packing: number;
	/** Usual turns of one coil of AWG 42. */
	turns: number;
	/** Two coils side by side: between their middles. null for a pickup of one coil. */
	spacingM: number | null;
}

export const genericBobbins: readonly GenericBobbin[] = [
	{
		key: 'two-coil',
		name: 'One of two coils side by side',
		bobbin: { straightM: 0.0508, endDiameterM: 0.006, traverseM: 0.0062, flangeOuterM: 0.0175 },
		packing: 0.8,
		turns: 5000,
		spacingM: 0.018
	},
	{
		key: 'flat-tall',
		name: 'One tall coil around rods',
		bobbin: { straightM: 0.051, endDiameterM: 0.0049, traverseM: 0.0112, flangeOuterM: 0.0165 },
		packing: 0.88,
		turns: 8000,
		spacingM: null
	},
	{
		key: 'wide',
		name: 'One wide, low coil',
		bobbin: { straightM: 0.05, endDiameterM: 0.006, traverseM: 0.00635, flangeOuterM: 0.034 },
		packing: 0.88,
		turns: 10_000,
		spacingM: null
	}
];
