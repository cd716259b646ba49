import { limits } from '../coil/limits.ts';
import type { Typed, UnitPreference } from '../coil/units.ts';
import { awgTableDiameterM, enamelMaterials, wireSizes, type EnamelMaterial } from '../coil/wire.ts';
import { grades, type Grade, type SpecWire } from './content.ts';
import { measure, readChoice, readMeasure, type Measure } from './measures.ts';
import { tableWire } from './start.ts';

/** A wire as typed in a form, and as it is stored: that of a spec, or of a spool. */

export const wireFields = [
	'wireSize',
	'wireBasis',
	'wireDiameter',
	'wireGrade',
	'wireMaterial',
	'wireOverall',
	'wireOverallMin',
	'wireOverallMax',
	'wireOhmPerM'
] as const;
export type WireField = (typeof wireFields)[number];
export type WireTyped = Record<WireField, string>;

/** The choice of a size that is in no table. */
export const ownSize = 'own';

export const wireSizeOptions: readonly { value: string; label: string }[] = [
	...wireSizes.map(({ key, name }) => ({ value: key, label: name })),
	{ value: ownSize, label: 'another size' }
];
export const wireBasisOptions = [
	{ value: 'law', label: 'the exact gauge law' },
	{ value: 'table', label: 'the rounded inch table' }
] as const satisfies { value: SpecWire['diameterBasis']; label: string }[];
export const gradeOptions = grades.map((value) => ({ value, label: value }));
/** Each says whether its enamel comes off under the iron. */
export const materialOptions = (Object.keys(enamelMaterials) as EnamelMaterial[]).map((value) => ({
	value,
	label: `${enamelMaterials[value].name}, ${enamelMaterials[value].solders ? 'solders through' : 'strip it first'}`
}));

export const wireLabels: Readonly<Record<WireField, string>> = {
	wireSize: 'Wire size',
	wireBasis: 'Gauge diameter by',
	wireDiameter: 'Bare diameter',
	wireGrade: 'Enamel grade',
	wireMaterial: 'Enamel',
	wireOverall: 'Overall diameter',
	wireOverallMin: 'Overall, least',
	wireOverallMax: 'Overall, greatest',
	wireOhmPerM: 'Measured at 20 °C'
};

type WireMeasure = 'wireDiameter' | 'wireOverall' | 'wireOverallMin' | 'wireOverallMax' | 'wireOhmPerM';

/**
 * A gauge names a bare conductor only: whoever prefers gauges has the overall diameter in millimetres or inches, as they
 * want other lengths. Their bare diameter carries its own unit, "AWG 42" or "0.063 mm".
 */
export function wireMeasures(units: UnitPreference): Record<WireMeasure, Measure> {
	const small = units.wireDiameter === 'awg' ? units.length : units.wireDiameter;
	const overall = (field: WireMeasure, empty: string | null) =>
		measure(wireLabels[field], 'wireDiameter', small, limits['wire.overallDiameterM'], empty);
	const bare = measure(wireLabels.wireDiameter, 'wireDiameter', small, limits['wire.diameterM']);
	const gauged = measure(wireLabels.wireDiameter, 'wireDiameter', 'awg', limits['wire.diameterM']);
	return {
		wireDiameter:
			units.wireDiameter === 'awg'
				? {
						...bare,
						symbol: '',
						read: (text) => readBare(text, bare, gauged),
						write: (si, digits) => bareText(si, bare, gauged, digits)
					}
				: bare,
		wireOverall: overall('wireOverall', null),
		wireOverallMin: overall('wireOverallMin', 'not known'),
		wireOverallMax: overall('wireOverallMax', 'not known'),
		wireOhmPerM: measure(
			wireLabels.wireOhmPerM,
			'ohmPerLength',
			units.length === 'inch' ? 'ohmPer1000Feet' : 'ohmPerM',
			limits['wire.ohmPerM'],
			'not measured'
		)
	};
}

/** A bare number is a gauge; where no wire of that gauge is wound, it is a diameter: "0.063" is no gauge. */
function readBare(text: string, bare: Measure, gauged: Measure): Typed {
	const [least, most] = bare.range;
	const gauge = gauged.read(text);
	if (!gauge.ok || (gauge.value >= least && gauge.value <= most)) return gauge;
	const diameter = bare.read(text);
	return diameter.ok && diameter.value >= least && diameter.value <= most ? diameter : gauge;
}

/** A whole gauge by its number, anything else as a diameter. */
function bareText(si: number, bare: Measure, gauged: Measure, digits?: number): string {
	const gauge = gauged.write(si);
	return /^\d+$/.test(gauge) ? `AWG ${gauge}` : bare.tell(si, digits);
}

/** A wire as its fields show it. */
export function writeWire(wire: SpecWire, units: UnitPreference): WireTyped {
	const measures = wireMeasures(units);
	const text = (field: WireMeasure, si: number | null) => (si === null ? '' : measures[field].write(si));
	return {
		wireSize: wire.sizeKey ?? ownSize,
		wireBasis: wire.diameterBasis,
		wireDiameter: text('wireDiameter', wire.diameterM),
		wireGrade: wire.grade,
		wireMaterial: wire.material,
		wireOverall: text('wireOverall', wire.overallDiameterM),
		wireOverallMin: text('wireOverallMin', wire.overallMinM),
		wireOverallMax: text('wireOverallMax', wire.overallMaxM),
		wireOhmPerM: text('wireOhmPerM', wire.ohmPerM)
	};
}

/** The table's wire for a size, grade and basis; null for a size of one's own. A grade it does not come in becomes its first. */
function ofTable({ wireSize, wireGrade, wireMaterial, wireBasis }: WireTyped): SpecWire | null {
	const size = wireSizes.find(({ key }) => key === wireSize);
	if (!size) return null;
	const material = wireMaterial in enamelMaterials ? (wireMaterial as EnamelMaterial) : 'polyurethane';
	const wire = tableWire(wireSize, wireGrade as Grade, material);
	const rounded = wireBasis === 'table' && size.gauge !== null ? awgTableDiameterM(size.gauge) : null;
	return rounded === null ? wire : { ...wire, diameterBasis: 'table', diameterM: rounded };
}

/**
 * What choosing a size, a grade or a basis fills in: the table's figures. What was measured on a spool and the enamel's
 * material stay. Anything else chosen fills nothing.
 */
export function fillWire<Typed extends WireTyped>(typed: Typed, units: UnitPreference): Typed {
	const table = ofTable(typed);
	if (!table) return typed;
	const { wireBasis, wireMaterial, wireOhmPerM } = typed;
	return { ...typed, ...writeWire(table, units), wireBasis, wireMaterial, wireOhmPerM };
}

const chosen = ['wireSize', 'wireGrade', 'wireBasis'] as const;
const figures = ['wireDiameter', 'wireOverall', 'wireOverallMin', 'wireOverallMax'] as const;

/**
 * For a form sent without scripts: where another size, grade or basis was chosen and the figures still are those of the
 * wire before, the table's are meant.
 */
export function fillChosenWire<Typed extends WireTyped>(typed: Typed, units: UnitPreference, base: SpecWire): Typed {
	const before = writeWire(base, units);
	const other = chosen.some((field) => typed[field] !== before[field]);
	const untouched = figures.every((field) => typed[field] === before[field]);
	return other && untouched ? fillWire(typed, units) : typed;
}

export type WireRead =
	{ ok: true; wire: SpecWire } | { ok: false; errors: Partial<Record<WireField, string>>; partial: SpecWire };

/**
 * Typed fields to a wire, SI.
 *
 * @param base the wire the fields were written from: a text that is unchanged keeps its exact value
 * @returns `partial` has the base's value, or a usual one, where a field was refused
 */
export function readWire(
	typed: WireTyped,
	units: UnitPreference,
	base: SpecWire | null,
	last: SpecWire | null = base
): WireRead {
	const measures = wireMeasures(units);
	const before = base && writeWire(base, units);
	const table = ofTable(typed);
	const tableText = table && writeWire(table, units);
	const fallback = last ?? table ?? tableWire('awg-42', 'single');
	const errors: Partial<Record<WireField, string>> = {};

	const size = (field: WireMeasure, of: (wire: SpecWire) => number | null): number | null => {
		if (base && before && typed[field] === before[field]) return of(base);
		// Six digits do not hold the exact law: the table's own figure stands behind its text.
		if (table && tableText && typed[field] === tableText[field]) return of(table);
		const read = readMeasure(typed[field], measures[field]);
		if (read.ok) return read.value;
		errors[field] = read.sentence;
		return of(fallback);
	};
	const choice = <Value extends string>(
		field: WireField,
		options: readonly { value: Value; label: string }[],
		otherwise: Value
	): Value => {
		const read = readChoice(typed[field], wireLabels[field], options);
		if (read.ok) return read.value;
		errors[field] = read.sentence;
		return otherwise;
	};

	const diameterM = size('wireDiameter', (wire) => wire.diameterM) ?? fallback.diameterM;
	const wire: SpecWire = {
		sizeKey: sizeOf(choice('wireSize', wireSizeOptions, fallback.sizeKey ?? ownSize), diameterM, base),
		diameterM,
		diameterBasis: choice('wireBasis', wireBasisOptions, fallback.diameterBasis),
		grade: choice('wireGrade', gradeOptions, fallback.grade),
		material: choice('wireMaterial', materialOptions, fallback.material),
		overallDiameterM: size('wireOverall', (each) => each.overallDiameterM) ?? fallback.overallDiameterM,
		overallMinM: size('wireOverallMin', (each) => each.overallMinM),
		overallMaxM: size('wireOverallMax', (each) => each.overallMaxM),
		ohmPerM: size('wireOhmPerM', (each) => each.ohmPerM)
	};
	const { overallDiameterM: over, overallMinM: least, overallMaxM: greatest } = wire;
	if (over < diameterM) {
		errors.wireOverall ??= `${wireLabels.wireOverall}: at least the bare diameter, ${measures.wireOverall.tell(diameterM, 4)}; “${typed.wireOverall.trim()}” was kept as typed.`;
	}
	if (least !== null && least > over) {
		errors.wireOverallMin ??= `${wireLabels.wireOverallMin}: no more than the overall diameter, ${measures.wireOverall.tell(over, 4)}; “${typed.wireOverallMin.trim()}” was kept as typed.`;
	}
	if (greatest !== null && greatest < over) {
		errors.wireOverallMax ??= `${wireLabels.wireOverallMax}: at least the overall diameter, ${measures.wireOverall.tell(over, 4)}; “${typed.wireOverallMax.trim()}” was kept as typed.`;
	}
	if (Object.keys(errors).length === 0) return { ok: true, wire };
	const sound =
		over >= diameterM ? wire : { ...wire, diameterM: fallback.diameterM, overallDiameterM: fallback.overallDiameterM };
	return { ok: false, errors, partial: sound };
}

/** A size of the table only as long as the bare diameter is the table's, or what the base said it was. */
function sizeOf(key: string, diameterM: number, base: SpecWire | null): string | null {
	const size = wireSizes.find((each) => each.key === key);
	if (!size) return null;
	if (base && base.sizeKey === key && base.diameterM === diameterM) return key;
	const rounded = size.gauge === null ? null : awgTableDiameterM(size.gauge);
	return diameterM === size.diameterM || diameterM === rounded ? key : null;
}

/** The wire in a few words: "AWG 42, single, polyurethane". */
export function wireWords(wire: SpecWire, units: UnitPreference): string {
	const size = wireSizes.find(({ key }) => key === wire.sizeKey);
	const { wireDiameter } = wireMeasures(units);
	const name =
		size?.name ??
		(wireDiameter.symbol === '' ? wireDiameter.write(wire.diameterM, 4) : wireDiameter.tell(wire.diameterM, 4));
	return `${name}, ${wire.grade}, ${enamelMaterials[wire.material].name}`;
}
