import { sound } from './refuse.ts';

/**
 * Conductors: size, resistance, mass, enamel, tension. SI throughout: metres, ohms per metre, kilograms per metre, newtons.
 */

export const metresPerInch = 0.0254;

/** IEC 60028: resistivity of annealed copper at 20 °C, 1/58 Ω·mm²/m. */
export const copperResistivityOhmM = 1e-6 / 58;
/** Conductivity that winding-wire tables quote, 58.5 MS/m (IEC 60317-0-1; the clause from memory). */
export const windingWireConductivitySPerM = 58.5e6;
/** IEC 60028: density of annealed copper at 20 °C. */
export const copperDensityKgPerM3 = 8890;
/** IEC 60028, ASTM B193: temperature coefficient of resistance at 20 °C. */
export const copperAlphaPerK = 0.00393;

/**
 * Diameter of a gauge by the exact law d = 0.127 mm · 92^((36 − n)/39) (ASTM B258).
 *
 * @param gauge AWG number, need not be whole
 * @returns metres
 */
export const awgDiameterM = (gauge: number): number => sound(0.127e-3 * 92 ** ((36 - gauge) / 39));

/** Gauge of a diameter in metres by the same law; need not be whole. */
export const awgOfDiameter = (diameterM: number): number =>
	sound(36 - (39 * Math.log(diameterM / 0.127e-3)) / Math.log(92));

/**
 * Rounded inch sizes of winding-wire tables. Against the law they shift resistance by +2.9, 0, −0.5, +1.9 and −2.2 % for
 * AWG 40 to 44, so which of the two is used is always said.
 */
export const awgTableInch: Readonly<Record<number, number>> = {
	40: 0.0031,
	41: 0.0028,
	42: 0.0025,
	43: 0.0022,
	44: 0.002
};

/** Diameter of a gauge by the rounded inch table, in metres; null for a gauge the table does not hold. */
export function awgTableDiameterM(gauge: number): number | null {
	const inch = awgTableInch[gauge];
	return inch === undefined ? null : sound(inch * metresPerInch);
}

/** Overall diameters of enamelled wire in metres: least, nominal and greatest. Editable data, these are where to start. */
export interface OverallDiameter {
	minM: number;
	nomM: number;
	maxM: number;
}

export interface WireSize {
	key: string;
	/** As it is said: "AWG 42" or "0.063 mm". */
	name: string;
	gauge: number | null;
	/** Bare conductor, metres, by the law for gauges. */
	diameterM: number;
	enamel: Readonly<Record<string, OverallDiameter>>;
	/** Where the overall diameters come from. */
	source: string;
}

const inch = (minIn: number, nomIn: number, maxIn: number): OverallDiameter => ({
	minM: minIn * metresPerInch,
	nomM: nomIn * metresPerInch,
	maxM: maxIn * metresPerInch
});
const millimetre = (minMm: number, maxMm: number): OverallDiameter => ({
	minM: minMm / 1000,
	nomM: (minMm + maxMm) / 2000,
	maxM: maxMm / 1000
});

/** The limit either side of the bare diameter of AWG 42, ±0.0001 in (NEMA MW 1000, from memory), taken for all sizes… */
const bareToleranceM = 0.0001 * metresPerInch;
/** …but never more than this part of the diameter: thinner wire is drawn finer. */
const bareToleranceMax = 0.05;

/** How far the bare diameter may be off either way. */
export const diameterToleranceM = (diameterM: number): number =>
	sound(Math.min(bareToleranceM, bareToleranceMax * diameterM));

/**
 * How far the overall diameter may be off either way where only one figure of it is known: the band from least to greatest
 * of single-enamel wire, which is near this part of it in every size of the table.
 */
export const overallTolerancePart = 0.07;

const gauge = (n: number, enamel: WireSize['enamel'], source: string): WireSize => ({
	key: `awg-${n}`,
	name: `AWG ${n}`,
	gauge: n,
	diameterM: awgDiameterM(n),
	enamel,
	source
});
const metric = (mm: string, grade1: [number, number], grade2: [number, number]): WireSize => ({
	key: `mm-${mm}`,
	name: `${mm} mm`,
	gauge: null,
	diameterM: Number(mm) / 1000,
	enamel: { 'grade 1': millimetre(...grade1), 'grade 2': millimetre(...grade2) },
	source: "IEC 60317-0-1 table 1, as a maker's table gives it"
});

/** Sizes a pickup is wound with. Overall diameters of AWG 41 to 44 are from memory; all of them may be edited. */
export const wireSizes: readonly WireSize[] = [
	gauge(40, { single: inch(0.0032, 0.00345, 0.0037) }, 'NEMA MW 1000, as a maker of wire cites it'),
	gauge(41, { single: inch(0.0029, 0.0031, 0.0033), heavy: inch(0.0031, 0.00335, 0.0036) }, 'from memory'),
	gauge(42, { single: inch(0.0026, 0.0028, 0.003), heavy: inch(0.0028, 0.003, 0.0032) }, 'from memory'),
	gauge(43, { single: inch(0.0023, 0.0025, 0.0027), heavy: inch(0.0025, 0.0027, 0.0029) }, 'from memory'),
	gauge(44, { single: inch(0.0021, 0.00225, 0.0024), heavy: inch(0.0023, 0.0025, 0.0027) }, 'from memory'),
	metric('0.050', [0.055, 0.06], [0.06, 0.066]),
	metric('0.056', [0.062, 0.067], [0.067, 0.074]),
	metric('0.063', [0.069, 0.076], [0.075, 0.083]),
	metric('0.071', [0.078, 0.084], [0.083, 0.091]),
	metric('0.080', [0.087, 0.094], [0.094, 0.101])
];

/** Two leads of 28 AWG: what they add to a pickup, in Ω per metre of cable, there and back. */
export const leadOhmPerM = 2 * (copperResistivityOhmM / ((Math.PI * awgDiameterM(28) ** 2) / 4));

/** Whether enamel comes off under the iron. Common practice, no source. */
export const enamelMaterials = {
	polyurethane: { name: 'polyurethane', solders: true },
	'polyvinyl-acetal': { name: 'polyvinyl acetal', solders: false },
	oleoresinous: { name: 'plain oleoresinous', solders: false },
	polyester: { name: 'polyester', solders: false }
} as const;
export type EnamelMaterial = keyof typeof enamelMaterials;

/** Cross-section in m². */
export const areaM2 = (diameterM: number): number => sound((Math.PI * diameterM ** 2) / 4);

/** Resistance at another temperature, by the linear law from 20 °C (IEC 60028). */
export const atTemperature = (ohmAt20C: number, temperatureC: number): number =>
	sound(ohmAt20C * (1 + copperAlphaPerK * (temperatureC - 20)));

/** The inverse: what measured at a temperature would measure at 20 °C. */
export const to20C = (ohm: number, temperatureC: number): number =>
	sound(ohm / (1 + copperAlphaPerK * (temperatureC - 20)));

/**
 * Resistance per metre.
 *
 * @param resistivityOhmM at 20 °C, copper of IEC 60028 unless given
 */
export function ohmPerM(diameterM: number, temperatureC = 20, resistivityOhmM = copperResistivityOhmM): number {
	return atTemperature(resistivityOhmM / areaM2(diameterM), temperatureC);
}

/** Copper mass per metre in kg. */
export const copperKgPerM = (diameterM: number): number => sound(copperDensityKgPerM3 * areaM2(diameterM));

const newtonPerPoundForce = 4.4482216152605;
/** Greatest recommended tension of AWG 40 to 44 in pounds-force: a wire maker's published tension chart. */
const tensionMaxLbf: readonly [gauge: number, lbf: number][] = [
	[40, 0.075],
	[41, 0.062],
	[42, 0.049],
	[43, 0.038],
	[44, 0.023]
];

/**
 * Greatest recommended tension in newtons and the band of 50 to 80 % to wind in; null outside AWG 40 to 44, where the
 * chart says nothing. Between gauges in proportion.
 */
export function tensionN(diameterM: number): { maxN: number; fromN: number; toN: number } | null {
	const n = awgOfDiameter(diameterM);
	const first = tensionMaxLbf[0]!;
	const last = tensionMaxLbf[tensionMaxLbf.length - 1]!;
	// A gauge by the rounded table lies a little beside its number.
	if (!(n >= first[0] - 0.5 && n <= last[0] + 0.5)) return null;
	const at = Math.min(last[0], Math.max(first[0], n));
	const below = tensionMaxLbf[Math.min(tensionMaxLbf.length - 2, Math.floor(at) - first[0])]!;
	const above = tensionMaxLbf[below[0] - first[0] + 1]!;
	const maxN = (below[1] + (above[1] - below[1]) * (at - below[0])) * newtonPerPoundForce;
	return { maxN, fromN: 0.5 * maxN, toN: 0.8 * maxN };
}
