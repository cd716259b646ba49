import { z } from 'zod';
import { limits, turnsMax, type LimitedField } from '../coil/limits.ts';
import { enamelMaterials, type EnamelMaterial } from '../coil/wire.ts';

/**
 * What one revision of a spec says, as it is stored: SI throughout, `…M` metres, `…F` farads, `…Ohm` ohms. Text fields hold
 * words of the trade as the workshop writes them; nothing is reckoned from them.
 */

const line = (charactersMax: number) => z.string().max(2 * charactersMax);
const number = (field: LimitedField) => z.number().min(limits[field][0]).max(limits[field][1]);

/** Longest texts, in characters. */
export const textMax = { name: 80, line: 120, notes: 4000, why: 500 } as const;

/** Ranges of what only a spec holds; the rest is in `coil/limits.ts`. */
export const specLimits = {
	toleranceTurns: [0, 1000],
	lookEvery: [0, turnsMax],
	firstLook: [0, turnsMax],
	/** Between neighbouring strings: from a doubled course to a bass. */
	stringSpacingM: [0.005, 0.03],
	/** Of the fingerboard's arc; flat is none at all. */
	stringRadiusM: [0.05, 2],
	/** Half-width of the packing, at most the third that the computation takes. */
	packingHalfWidth: [0, 0.3],
	/** Of the pickup's own leads and of the player's cable. */
	cableLengthM: [0, 100],
	cableFPerM: [0, 1e-9]
} as const satisfies Record<string, readonly [number, number]>;

const own = (field: keyof typeof specLimits) => z.number().min(specLimits[field][0]).max(specLimits[field][1]);

export const grades = ['single', 'heavy', 'grade 1', 'grade 2'] as const;
export type Grade = (typeof grades)[number];

/** A wire as a spec asks for it or a spool carries it. */
export const specWire = z.strictObject({
	/** `key` of `wireSizes`; null: a size of one's own. */
	sizeKey: z.string().nullable(),
	diameterM: number('wire.diameterM'),
	/** Where a gauge's diameter comes from; a size in millimetres has none. */
	diameterBasis: z.enum(['law', 'table']),
	grade: z.enum(grades),
	material: z.enum(Object.keys(enamelMaterials) as [EnamelMaterial, ...EnamelMaterial[]]),
	overallDiameterM: number('wire.overallDiameterM'),
	/** Least and greatest overall diameter; null: not known, the usual part either way. */
	overallMinM: number('wire.overallDiameterM').nullable(),
	overallMaxM: number('wire.overallDiameterM').nullable(),
	/** Measured, at 20 °C; null: by the diameter. */
	ohmPerM: number('wire.ohmPerM').nullable()
});
export type SpecWire = z.infer<typeof specWire>;

export const specCoil = z.strictObject({
	/** "Screw coil", "Slug coil", "Coil". */
	name: z
		.string()
		.min(1)
		.max(2 * textMax.name),
	turns: z.number().int().min(1).max(turnsMax),
	/** Seen from the top of the bobbin. */
	direction: z.enum(['counter-clockwise', 'clockwise']),
	/** Where the wire starts and ends, in words: "through the inner eyelet". */
	start: line(textMax.line),
	finish: line(textMax.line),
	toleranceTurns: own('toleranceTurns').int(),
	/** The pole that faces the strings, and the lead that carries the signal. */
	pole: z.enum(['north-up', 'south-up']),
	hot: z.enum(['start', 'finish'])
});
export type SpecCoil = z.infer<typeof specCoil>;

export const kinds = ['one-coil', 'two-coils', 'wide-one-coil', 'other'] as const;
export type SpecKind = (typeof kinds)[number];

export const specContent = z.strictObject({
	name: z
		.string()
		.min(1)
		.max(2 * textMax.name),
	kind: z.enum(kinds),
	strings: z.strictObject({
		spacingM: own('stringSpacingM').nullable(),
		/** null: flat. */
		radiusM: own('stringRadiusM').nullable()
	}),
	mounting: line(textMax.line),
	bobbin: z.strictObject({
		/** What the workshop calls it: coils of one name and spool teach one another. */
		name: z
			.string()
			.min(1)
			.max(2 * textMax.name),
		/** `key` of `genericBobbins` while its figures are still those; null: the workshop's own. */
		generic: z.string().nullable(),
		straightM: number('bobbin.straightM'),
		endDiameterM: number('bobbin.endDiameterM'),
		traverseM: number('bobbin.traverseM'),
		flangeOuterM: number('bobbin.flangeOuterM').nullable(),
		/** How the winder's guide stops are set for it, in the workshop's own words. */
		guideStops: line(textMax.line)
	}),
	wire: specWire,
	/** The spool to reckon with; null: none chosen yet. */
	spoolId: z.string().nullable(),
	packing: z.strictObject({
		/** `key` of `packings`, or a figure of one's own. */
		key: z.string(),
		value: number('packing'),
		/** How far it may be off either way. */
		halfWidth: own('packingHalfWidth'),
		/** It was fitted from widths of wound coils. */
		measured: z.boolean()
	}),
	coils: z.array(specCoil).min(1).max(2),
	wiring: z.enum(['series', 'parallel', 'single']),
	/** Between the middles of two coils; null: side by side with hardly a gap. */
	coilSpacingM: number('spacingM').nullable(),
	magnet: z.strictObject({
		/** Trade words, such as "Alnico 5". */
		material: line(textMax.line),
		shape: z.enum(['bar', 'rods', 'other', 'none']),
		/** How strongly it is charged and what it is aged to, in words. */
		charged: line(textMax.line),
		aged: line(textMax.line)
	}),
	cores: z.strictObject({
		/** `key` of `cores`. */
		key: z.string(),
		effectivePermeability: number('effectivePermeability'),
		/** It was fitted to coils whose inductance was measured. */
		measured: z.boolean()
	}),
	/** The pickup's own leads. */
	leads: z.strictObject({ words: line(textMax.line), lengthM: own('cableLengthM') }),
	cover: z.strictObject({
		/** `key` of `covers`. */
		key: z.string(),
		words: line(textMax.line)
	}),
	potting: line(textMax.line),
	looks: z.strictObject({
		every: own('lookEvery').int(),
		/** Turns of one early look on the first coil; 0: none. */
		first: own('firstLook').int()
	}),
	/** What it plays into. */
	load: z.strictObject({
		volumePotOhm: number('load.volumePotOhm'),
		volumeTaper: z.enum(['audio', 'linear']),
		/** null: no tone control. */
		tonePotOhm: number('load.tonePotOhm').nullable(),
		toneTaper: z.enum(['audio', 'linear']),
		toneCapF: number('load.toneCapF'),
		cableLengthM: own('cableLengthM'),
		cableFPerM: own('cableFPerM'),
		inputOhm: number('load.inputOhm'),
		/** Self-capacitance where it was measured; null: by the packing. */
		coilF: number('load.coilF').nullable(),
		/** Losses as a resistance across the inductance; null: none. */
		lossOhm: number('load.lossOhm').nullable()
	}),
	notes: line(textMax.notes)
});
export type SpecContent = z.infer<typeof specContent>;
