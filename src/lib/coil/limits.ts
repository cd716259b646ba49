/**
 * The ranges in which inputs make physical sense, SI. One table for the refusals of the library and for the schema of a
 * request, so that both say the same.
 */
export type Range = readonly [min: number, max: number];

/** Turns beyond any pickup. */
export const turnsMax = 100_000;
/** Winding depth beyond any pickup. */
export const windingDepthMaxM = 0.1;
/** Round wires nested in the hollows of the layer below fill 2/√3 of their squares: no winding is denser. */
export const packingMax = 2 / Math.sqrt(3);

export const limits = {
	'bobbin.straightM': [0, 0.5],
	'bobbin.endDiameterM': [0.0005, 0.2],
	'bobbin.traverseM': [0.0005, 0.1],
	'bobbin.flangeOuterM': [0.0005, 0.5],
	// AWG 58 to AWG 12.
	'wire.awg': [12, 58],
	'wire.diameterM': [0.00001, 0.0021],
	'wire.overallDiameterM': [0.00001, 0.003],
	'wire.ohmPerM': [0.001, 1000],
	packing: [0.3, packingMax],
	turns: [0, turnsMax],
	// Enamel and wax end well before.
	temperatureC: [-40, 150],
	spacingM: [0.001, 0.5],
	effectivePermeability: [0.5, 20],
	'load.volumePotOhm': [100, 1e12],
	'load.volume': [0, 1],
	'load.tonePotOhm': [100, 1e12],
	'load.toneCapF': [0, 1e-5],
	'load.tone': [0, 1],
	'load.cableF': [0, 1e-6],
	'load.inputOhm': [100, 1e12],
	'load.coilF': [0, 1e-6],
	'load.lossOhm': [10, 1e12]
} as const satisfies Record<string, Range>;

export type LimitedField = keyof typeof limits;

/** A field with its range, as `outside` takes it. */
export const within = (
	field: LimitedField,
	value: number
): readonly [field: string, value: number, min: number, max: number] => [
	field,
	value,
	limits[field][0],
	limits[field][1]
];
