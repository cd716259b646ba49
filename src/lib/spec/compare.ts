import { coverage } from '../coil/measurement.ts';
import type { Contribution, Prediction } from '../coil/predict.ts';
import type { Refused } from '../coil/refuse.ts';
import type { Uncertain } from '../coil/uncertainty.ts';
import { quantities, wireLengthUnit, type Quantity, type UnitOf, type UnitPreference } from '../coil/units.ts';
import { enamelMaterials, wireSizes } from '../coil/wire.ts';
import { turnsText } from '../format.ts';
import type { SpecCoil, SpecContent, SpecWire } from './content.ts';
import { roomOf } from './figures.ts';
import {
	bobbinOptions,
	coreOptions,
	coverOptions,
	directionOptions,
	hotOptions,
	kindLabels,
	magnetShapeOptions,
	packingOptions,
	poleOptions,
	specLabels,
	specMeasures,
	wiringOptions
} from './form.ts';
import type { Measure } from './measures.ts';
import { predictSpec, specInput } from './model.ts';
import { decimalText, plusMinus, plusMinusOf } from './words.ts';

/**
 * Two revisions side by side: every field in words, what changed, and what each change alone and all of them together do
 * to every predicted figure.
 */

/** One revision with the spool it reckons with, which stands outside the spec. */
export interface Side {
	content: SpecContent;
	/** The spool's wire in place of the spec's; null: no spool. */
	spoolWire: SpecWire | null;
	spoolName: string | null;
}

interface FieldKind {
	group: string;
	/** Where it stands in the content: `bobbin.traverseM`, `coils.0.turns`. */
	key: string;
	label: string;
	/** What makes it another one. */
	of(side: Side): unknown;
	/** null: there is no such field, as of a second coil where there is one. */
	text(side: Side, digits: number): string | null;
	/** `into` with this one field of `from`; null: it cannot change alone. */
	put(into: Side, from: Side): Side | null;
}

/** Digits of a value as it is told; where two tell the same and are not, as many as a number has. */
const usualDigits = 6;
const allDigits = 15;
/** The law of gauges has no end of decimals. */
const bareDigits = 4;

const nothingSaid = 'not said';
const chosen = (options: readonly { value: string; label: string }[], value: string): string =>
	options.find((option) => option.value === value)?.label ?? value;
const countWords: Readonly<Record<number, string>> = { 1: 'one', 2: 'two' };

/** Every field there is for so many coils, in the order of the form. */
function fieldKinds(units: UnitPreference, coils: number): FieldKind[] {
	const measures = specMeasures(units);
	const told = (measure: Measure, si: number | null, digits: number): string =>
		si === null ? (measure.empty ?? nothingSaid) : measure.tell(si, digits);
	const words = (text: string): string => (text.trim() === '' ? nothingSaid : text);

	const fields: FieldKind[] = [];
	const changedContent = (into: Side, change: (content: SpecContent) => SpecContent): Side => ({
		...into,
		content: change(into.content)
	});
	const top = <Key extends keyof SpecContent>(
		group: string,
		key: Key,
		label: string,
		text: (value: SpecContent[Key], digits: number) => string
	) =>
		fields.push({
			group,
			key,
			label,
			of: ({ content }) => content[key],
			text: ({ content }, digits) => text(content[key], digits),
			put: (into, from) => changedContent(into, (content) => ({ ...content, [key]: from.content[key] }))
		});
	/** One or more parts of a piece of the content that make one field in the trade. */
	type Piece = 'strings' | 'bobbin' | 'wire' | 'packing' | 'magnet' | 'cores' | 'leads' | 'cover' | 'looks' | 'load';
	const part = <Of extends Piece>(
		group: string,
		of: Of,
		names: readonly (keyof SpecContent[Of] & string)[],
		label: string,
		text: (piece: SpecContent[Of], digits: number) => string
	) =>
		fields.push({
			group,
			key: `${of}.${names[0]}`,
			label,
			of: ({ content }) => names.map((name) => content[of][name]),
			text: ({ content }, digits) => text(content[of], digits),
			put: (into, from) =>
				changedContent(into, (content) => ({
					...content,
					[of]: { ...content[of], ...Object.fromEntries(names.map((name) => [name, from.content[of][name]])) }
				}))
		});
	const coil = <Key extends keyof SpecCoil>(
		i: number,
		key: Key,
		label: string,
		text: (value: SpecCoil[Key]) => string
	) =>
		fields.push({
			group: coils === 1 ? 'Coil' : `Coil ${i + 1}`,
			key: `coils.${i}.${key}`,
			label,
			of: ({ content }) => content.coils[i]?.[key] ?? null,
			text: ({ content }) => {
				const own = content.coils[i];
				return own ? text(own[key]) : null;
			},
			put: (into, from) => {
				const other = from.content.coils[i];
				if (!other || !into.content.coils[i]) return null;
				return changedContent(into, (content) => ({
					...content,
					coils: content.coils.map((own, k) => (k === i ? { ...own, [key]: other[key] } : own))
				}));
			}
		});

	top('Spec', 'name', specLabels.name, (name) => name);
	top('Spec', 'kind', specLabels.kind, (kind) => kindLabels[kind]);
	part('Spec', 'strings', ['spacingM'], specLabels.stringSpacing, ({ spacingM }, d) =>
		told(measures.stringSpacing, spacingM, d)
	);
	part('Spec', 'strings', ['radiusM'], specLabels.stringRadius, ({ radiusM }, d) =>
		told(measures.stringRadius, radiusM, d)
	);
	top('Spec', 'mounting', specLabels.mounting, words);

	part('Bobbin', 'bobbin', ['name', 'generic'], specLabels.bobbinName, ({ name, generic }) => {
		if (generic === null) return name;
		const from = chosen(bobbinOptions, generic);
		return from === name ? `${name} (generic figures)` : `${name} (generic figures of: ${from})`;
	});
	part('Bobbin', 'bobbin', ['straightM'], specLabels.bobbinStraight, ({ straightM }, d) =>
		told(measures.bobbinStraight, straightM, d)
	);
	part('Bobbin', 'bobbin', ['endDiameterM'], specLabels.bobbinEndDiameter, ({ endDiameterM }, d) =>
		told(measures.bobbinEndDiameter, endDiameterM, d)
	);
	part('Bobbin', 'bobbin', ['traverseM'], specLabels.bobbinTraverse, ({ traverseM }, d) =>
		told(measures.bobbinTraverse, traverseM, d)
	);
	part('Bobbin', 'bobbin', ['flangeOuterM'], specLabels.bobbinFlange, ({ flangeOuterM }, d) =>
		told(measures.bobbinFlange, flangeOuterM, d)
	);
	part('Bobbin', 'bobbin', ['guideStops'], specLabels.guideStops, ({ guideStops }) => words(guideStops));

	// A size is its diameter: the one without the other is no wire.
	part('Wire', 'wire', ['sizeKey', 'diameterM', 'diameterBasis'], specLabels.wireSize, (wire, d) => {
		const size = wireSizes.find(({ key }) => key === wire.sizeKey);
		const bare = `${measures.wireOverall.tell(wire.diameterM, d === usualDigits ? bareDigits : d)} bare`;
		if (!size) return bare;
		const by = wire.diameterBasis === 'law' ? 'by the exact gauge law' : 'by the rounded inch table';
		return size.gauge === null ? `${size.name}, ${bare}` : `${size.name} ${by}, ${bare}`;
	});
	part('Wire', 'wire', ['grade'], specLabels.wireGrade, ({ grade }) => grade);
	part('Wire', 'wire', ['material'], specLabels.wireMaterial, ({ material }) => {
		const { name, solders } = enamelMaterials[material];
		return `${name}, ${solders ? 'solders through' : 'strip it first'}`;
	});
	part('Wire', 'wire', ['overallDiameterM'], specLabels.wireOverall, ({ overallDiameterM }, d) =>
		told(measures.wireOverall, overallDiameterM, d)
	);
	part('Wire', 'wire', ['overallMinM'], specLabels.wireOverallMin, ({ overallMinM }, d) =>
		told(measures.wireOverallMin, overallMinM, d)
	);
	part('Wire', 'wire', ['overallMaxM'], specLabels.wireOverallMax, ({ overallMaxM }, d) =>
		told(measures.wireOverallMax, overallMaxM, d)
	);
	part('Wire', 'wire', ['ohmPerM'], specLabels.wireOhmPerM, ({ ohmPerM }, d) => told(measures.wireOhmPerM, ohmPerM, d));
	fields.push({
		group: 'Wire',
		key: 'spoolId',
		label: specLabels.spool,
		of: ({ content }) => content.spoolId,
		text: ({ content, spoolName }) => (content.spoolId === null ? 'none chosen' : (spoolName ?? 'no longer there')),
		put: (into, from) => ({ ...from, content: { ...into.content, spoolId: from.content.spoolId } })
	});

	part('Winding', 'packing', ['key'], specLabels.packingKey, ({ key }) => chosen(packingOptions, key));
	part('Winding', 'packing', ['value', 'measured'], specLabels.packing, ({ value, measured }, d) =>
		measured ? `${measures.packing.tell(value, d)}, fitted from wound coils` : measures.packing.tell(value, d)
	);
	part('Winding', 'packing', ['halfWidth'], specLabels.packingHalfWidth, ({ halfWidth }, d) =>
		measures.packingHalfWidth.tell(halfWidth, d)
	);

	fields.push({
		group: 'Coils',
		key: 'coils.length',
		label: specLabels.coilCount,
		of: ({ content }) => content.coils.length,
		text: ({ content }) => countWords[content.coils.length] ?? String(content.coils.length),
		// A coil comes with how it is joined.
		put: (into, from) =>
			changedContent(into, (content) => ({
				...content,
				coils: from.content.coils.map((other, i) => content.coils[i] ?? other),
				wiring: from.content.wiring,
				coilSpacingM: from.content.coilSpacingM
			}))
	});
	top('Coils', 'wiring', specLabels.wiring, (wiring) => chosen(wiringOptions, wiring));
	top('Coils', 'coilSpacingM', specLabels.coilSpacing, (spacingM, d) => told(measures.coilSpacing, spacingM, d));
	for (let i = 0; i < coils; i += 1) {
		coil(i, 'name', specLabels.coil1Name, (name) => name);
		coil(i, 'turns', specLabels.coil1Turns, turnsText);
		coil(i, 'direction', specLabels.coil1Direction, (direction) => chosen(directionOptions, direction));
		coil(i, 'start', specLabels.coil1Start, words);
		coil(i, 'finish', specLabels.coil1Finish, words);
		coil(i, 'toleranceTurns', specLabels.coil1Tolerance, turnsText);
		coil(i, 'pole', specLabels.coil1Pole, (pole) => chosen(poleOptions, pole));
		coil(i, 'hot', specLabels.coil1Hot, (hot) => chosen(hotOptions, hot));
	}

	part('Magnet and cores', 'magnet', ['material'], specLabels.magnetMaterial, ({ material }) => words(material));
	part('Magnet and cores', 'magnet', ['shape'], specLabels.magnetShape, ({ shape }) =>
		chosen(magnetShapeOptions, shape)
	);
	part('Magnet and cores', 'magnet', ['charged'], specLabels.magnetCharged, ({ charged }) => words(charged));
	part('Magnet and cores', 'magnet', ['aged'], specLabels.magnetAged, ({ aged }) => words(aged));
	part('Magnet and cores', 'cores', ['key'], specLabels.coreKey, ({ key }) => chosen(coreOptions, key));
	part(
		'Magnet and cores',
		'cores',
		['effectivePermeability', 'measured'],
		specLabels.permeability,
		({ effectivePermeability, measured }, d) =>
			`${measures.permeability.tell(effectivePermeability, d)}${measured ? ', fitted from measured coils' : ''}`
	);

	part('Leads, cover and finish', 'leads', ['words'], specLabels.leadsWords, (leads) => words(leads.words));
	part('Leads, cover and finish', 'leads', ['lengthM'], specLabels.leadsLength, ({ lengthM }, d) =>
		told(measures.leadsLength, lengthM, d)
	);
	part('Leads, cover and finish', 'cover', ['key'], specLabels.coverKey, ({ key }) => chosen(coverOptions, key));
	part('Leads, cover and finish', 'cover', ['words'], specLabels.coverWords, (cover) => words(cover.words));
	top('Leads, cover and finish', 'potting', specLabels.potting, words);

	part('Looks', 'looks', ['every'], specLabels.lookEvery, ({ every }) => (every === 0 ? 'none' : turnsText(every)));
	part('Looks', 'looks', ['first'], specLabels.firstLook, ({ first }) => (first === 0 ? 'none' : turnsText(first)));

	part('Load', 'load', ['volumePotOhm'], specLabels.volumePot, ({ volumePotOhm }, d) =>
		told(measures.volumePot, volumePotOhm, d)
	);
	part('Load', 'load', ['volumeTaper'], specLabels.volumeTaper, ({ volumeTaper }) => volumeTaper);
	part('Load', 'load', ['tonePotOhm'], specLabels.tonePot, ({ tonePotOhm }, d) =>
		told(measures.tonePot, tonePotOhm, d)
	);
	part('Load', 'load', ['toneTaper'], specLabels.toneTaper, ({ toneTaper }) => toneTaper);
	part('Load', 'load', ['toneCapF'], specLabels.toneCap, ({ toneCapF }, d) => told(measures.toneCap, toneCapF, d));
	part('Load', 'load', ['cableLengthM'], specLabels.cableLength, ({ cableLengthM }, d) =>
		told(measures.cableLength, cableLengthM, d)
	);
	part('Load', 'load', ['cableFPerM'], specLabels.cableFPerM, ({ cableFPerM }, d) =>
		told(measures.cableFPerM, cableFPerM, d)
	);
	part('Load', 'load', ['inputOhm'], specLabels.input, ({ inputOhm }, d) => told(measures.input, inputOhm, d));
	part('Load', 'load', ['coilF'], specLabels.coilF, ({ coilF }, d) => told(measures.coilF, coilF, d));
	part('Load', 'load', ['lossOhm'], specLabels.loss, ({ lossOhm }, d) => told(measures.loss, lossOhm, d));
	top('Notes', 'notes', specLabels.notes, words);
	return fields;
}

/** How a difference stands to what two coils wound alike differ by of themselves; null: nothing is known of that. */
export interface BesideScatter {
	/** What they differ by at most, 19 times in 20: "0.10 kΩ". */
	alike: string;
	more: boolean;
}

export interface FigureDifference {
	key: string;
	label: string;
	/** With ±, 19 in 20; "none" where there is no such figure. */
	a: string;
	b: string;
	/** "+0.31 kΩ (+4.1 %)", "none", "under 0.01 %", or "cannot be told" where only one of the two has it. */
	difference: string;
	/** By so much that it shows. */
	moved: boolean;
	besideScatter: BesideScatter | null;
}

export type Effect = { ok: true; figures: FigureDifference[] } | { ok: false; refused: Refused };

export interface FieldPair {
	group: string;
	key: string;
	label: string;
	/** null: there is no such field. */
	a: string | null;
	b: string | null;
}

/** One field that differs. `effect` null: it cannot change without the number of coils. */
export interface FieldChange extends FieldPair {
	effect: Effect | null;
}

export interface Comparison {
	changed: FieldChange[];
	same: FieldPair[];
	/** Everything at once; null where nothing differs. */
	together: Effect | null;
}

/** Both sides field by field, and what the changes from `a` to `b` do. */
export function compareSpecs(a: Side, b: Side, units: UnitPreference): Comparison {
	const coils = Math.max(a.content.coils.length, b.content.coils.length);
	const changed: FieldChange[] = [];
	const same: FieldPair[] = [];
	const before = predicted(a);
	for (const { group, key, label, of, text, put } of fieldKinds(units, coils)) {
		const pair = { group, key, label, a: text(a, usualDigits), b: text(b, usualDigits) };
		if (JSON.stringify(of(a)) === JSON.stringify(of(b))) {
			same.push(pair);
			continue;
		}
		// What differs must not look alike.
		if (pair.a === pair.b) Object.assign(pair, { a: text(a, allDigits), b: text(b, allDigits) });
		const alone = put(a, b);
		changed.push({ ...pair, effect: alone && effectOf(a, before, alone, units) });
	}
	return { changed, same, together: changed.length === 0 ? null : effectOf(a, before, b, units) };
}

const predicted = ({ content, spoolWire }: Side) => predictSpec(content, { wire: spoolWire });

function effectOf(a: Side, before: ReturnType<typeof predicted>, b: Side, units: UnitPreference): Effect {
	// Words move nothing, and need no new computation to know it.
	const input = (side: Side) => JSON.stringify(specInput(side.content, { wire: side.spoolWire }));
	const after = input(a) === input(b) ? before : predicted(b);
	if (!before.ok) return { ok: false, refused: before };
	if (!after.ok) return { ok: false, refused: after };
	return { ok: true, figures: differences(a, before.value, b, after.value, units) };
}

/** A figure as both sides have it. */
interface Told {
	value: number;
	/** Standard. */
	uncertainty: number;
	/** Of that, what differs from one coil to the next wound alike. */
	scatter: number;
}

/** Inputs that are another for each coil, however alike they are wound. */
const ownOfEachCoil: readonly Contribution[] = ['scatter', 'air'];

const scatterOf = (figure: Uncertain<Contribution>): number =>
	Math.hypot(...figure.parts.filter(({ name }) => ownOfEachCoil.includes(name)).map(({ uncertainty }) => uncertainty));

const told = (figure: Uncertain<Contribution> | null): Told | null =>
	figure && { value: figure.value, uncertainty: figure.uncertainty, scatter: scatterOf(figure) };

/** Changes smaller than this part of a figure are rounding… */
const roundingPart = 1e-7;
/** …and no instrument of a workshop shows less than this. */
const shownPart = 1e-4;
/** Of decibels, which may be near zero: what the search for a peak leaves, and what can be seen. */
const roundingDb = 1e-4;
const shownDb = 0.01;

function differences(
	a: Side,
	before: Prediction,
	b: Side,
	after: Prediction,
	units: UnitPreference
): FigureDifference[] {
	const rows: FigureDifference[] = [];
	const add = <Q extends Quantity>(
		key: string,
		label: string,
		of: (prediction: Prediction) => Told | null,
		quantity: Q,
		unit: UnitOf<Q>,
		/** `fineUnit`: of the difference; `parts` false: a part of it would say nothing. */
		{ fineUnit = unit, parts = true }: { fineUnit?: UnitOf<Q>; parts?: boolean } = {}
	) => {
		// All units of these figures are multiples: a difference is turned like a value.
		const { fromSi, symbol } = (quantities[quantity] as Record<string, { symbol: string; fromSi(si: number): number }>)[
			fineUnit
		]!;
		const [one, other] = [of(before), of(after)];
		// Neither has it: a second coil where there is none.
		if (!one && !other) return;
		const text = (figure: Told | null) =>
			figure ? plusMinus(figure.value, figure.uncertainty, quantity, unit).text : 'none';
		const change = one && other ? other.value - one.value : null;
		const size = change === null ? 0 : Math.abs(change / one!.value);
		const moved = change === null || size > shownPart;
		const whole = change === null ? '' : `${signed(fromSi(change), 3)} ${symbol}`;
		rows.push({
			key,
			label,
			a: text(one),
			b: text(other),
			difference:
				change === null
					? 'cannot be told'
					: size <= roundingPart
						? 'none'
						: !moved
							? 'under 0.01 %'
							: parts
								? `${whole} (${signed((100 * change) / one!.value, 2)} %)`
								: whole,
			moved,
			besideScatter: moved ? beside(one, other, (si) => `${signed(fromSi(si), 2).slice(1)} ${symbol}`) : null
		});
	};
	const coils = Math.max(before.coils.length, after.coils.length);
	const coilName = (i: number) => b.content.coils[i]?.name ?? a.content.coils[i]?.name ?? `Coil ${i + 1}`;
	const ofEach = (label: string, i: number) => (coils === 1 ? label : `${label}, ${coilName(i)}`);

	add('resistanceOhm', 'Resistance at 20 °C', (p) => told(p.figures.resistanceOhm), 'resistance', units.resistance);
	for (let i = 0; coils > 1 && i < coils; i += 1) {
		const own = ({ coils: each, figures: { resistanceOhm } }: Prediction): Told | null => {
			const coil = each[i];
			if (!coil) return null;
			const scatter = (scatterOf(resistanceOhm) / resistanceOhm.value) * coil.resistanceOhm;
			return { value: coil.resistanceOhm, uncertainty: coil.resistanceUncertaintyOhm, scatter };
		};
		add(`coils.${i}.resistanceOhm`, ofEach('Resistance', i), own, 'resistance', units.resistance);
	}
	add('lengthM', 'Wire', (p) => told(p.figures.lengthM), 'length', wireLengthUnit(units));
	add('copperMassKg', 'Copper', (p) => told(p.figures.copperMassKg), 'mass', units.mass);
	for (let i = 0; i < coils; i += 1) {
		/** Of one coil, whose depth is as unsure by its turns as the first one's. */
		const sized =
			(name: 'outerLengthM' | 'outerWidthM' | 'windingDepthM' | 'meanTurnM', times: number) =>
			({ coils: each, figures }: Prediction): Told | null => {
				const coil = each[i];
				if (!coil) return null;
				const depth = times * figures.windingDepthM.uncertainty * (coil.turns / each[0]!.turns);
				const core = figures[name].parts.find((part) => part.name === 'bobbin')?.uncertainty ?? 0;
				return { value: coil[name], uncertainty: Math.hypot(depth, core), scatter: 0 };
			};
		const room = (prediction: Prediction): Told | null => {
			const of = roomOf(prediction, i);
			return of && { value: of.m, uncertainty: of.uncertaintyM, scatter: 0 };
		};
		const { length } = units;
		add(`coils.${i}.outerLengthM`, ofEach('Outer length', i), sized('outerLengthM', 2), 'length', length);
		add(`coils.${i}.outerWidthM`, ofEach('Outer width', i), sized('outerWidthM', 2), 'length', length);
		add(`coils.${i}.windingDepthM`, ofEach('Winding depth', i), sized('windingDepthM', 1), 'length', length);
		add(`coils.${i}.roomM`, ofEach('Room to the flange', i), room, 'length', length, { parts: false });
		add(`coils.${i}.meanTurnM`, ofEach('Mean turn', i), sized('meanTurnM', Math.PI), 'length', length);
	}
	add('copperFill', 'Copper fill', (p) => told(p.figures.copperFill), 'part', 'percent', { parts: false });
	add('airInductanceH', 'Inductance without iron', (p) => told(p.figures.airInductanceH), 'inductance', 'henry');
	add('inductanceH', 'Inductance', (p) => told(p.figures.inductanceH), 'inductance', 'henry');
	const coilF = ({ coilF: farad }: Prediction): Told | null =>
		farad === null ? null : { value: farad, uncertainty: 0, scatter: 0 };
	add('coilF', 'Self-capacitance', coilF, 'capacitance', 'picofarad');
	add('peakHz', 'Peak', (p) => told(p.peakHz), 'frequency', 'kilohertz', { fineUnit: 'hertz' });

	const [one, other] = [told(before.peakDb), told(after.peakDb)];
	const level = (figure: Told | null) => {
		if (!figure) return 'none';
		const { text, number } = plusMinusOf(figure.value, figure.uncertainty, 'dB');
		return figure.value > 0 && /[1-9]/.test(number) ? `+${text}` : text;
	};
	if (one || other) {
		const change = one && other ? other.value - one.value : null;
		const size = Math.abs(change ?? Infinity);
		rows.push({
			key: 'peakDb',
			label: 'Height of the peak',
			a: level(one),
			b: level(other),
			difference:
				change === null
					? 'cannot be told'
					: size <= roundingDb
						? 'none'
						: size < shownDb
							? 'under 0.01 dB'
							: `${signed(change, 2)} dB`,
			moved: size >= shownDb,
			// Most of what makes one peak taller than the next are losses, of which nobody knows how they scatter.
			besideScatter: null
		});
	}
	return rows;
}

/** Two coils wound alike differ by the scatter of both (JCGM 100, 5.1.2), 19 times in 20 by less than `coverage` times it. */
function beside(one: Told | null, other: Told | null, said: (si: number) => string): BesideScatter | null {
	if (!one || !other) return null;
	const alike = coverage * Math.hypot(one.scatter, other.scatter);
	return alike === 0 ? null : { alike: said(alike), more: Math.abs(other.value - one.value) > alike };
}

/** So many digits, with a sign: a difference is worth no more. */
function signed(value: number, digits: number): string {
	const places = value === 0 ? 0 : Math.max(0, Math.min(9, digits - 1 - Math.floor(Math.log10(Math.abs(value)))));
	const text = decimalText(value, places);
	return value > 0 ? `+${text}` : text;
}
