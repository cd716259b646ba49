import { genericBobbins } from '../coil/bobbins.ts';
import { cores } from '../coil/inductance.ts';
import { limits, turnsMax } from '../coil/limits.ts';
import type { Refused } from '../coil/refuse.ts';
import { covers } from '../coil/response.ts';
import { wireLengthUnit, type UnitPreference } from '../coil/units.ts';
import { packings } from '../coil/winding.ts';
import { turnsText, wholeText } from '../format.ts';
import { keptAsTyped, lengthOf, quoted, typedLine, typedText, typedWhole } from '../typed-values.ts';
import { kinds, specLimits, textMax, type SpecCoil, type SpecContent, type SpecKind } from './content.ts';
import { measure, perLengthMeasure, readChoice, readMeasure, type Measure } from './measures.ts';
import { startingSpec } from './start.ts';
import {
	fillChosenWire,
	readWire,
	wireFields,
	wireLabels,
	wireMeasures,
	writeWire,
	type WireField
} from './wire-form.ts';
import { refusedSentence } from './words.ts';

/**
 * A spec as a flat form of texts, in a person's units, and back. Read generously, stored exactly: a text that is still what
 * the form showed keeps the value it was written from, to the last bit. Nothing typed is ever changed.
 */

const coilParts = ['Name', 'Turns', 'Direction', 'Start', 'Finish', 'Tolerance', 'Pole', 'Hot'] as const;
type CoilPart = (typeof coilParts)[number];
export type CoilField = `coil${1 | 2}${CoilPart}`;

const plainFields = [
	'name',
	'kind',
	/** Coils of a pickup of another kind: 1 or 2. */
	'coilCount',
	'stringSpacing',
	'stringRadius',
	'mounting',
	'bobbinName',
	'bobbinGeneric',
	'bobbinStraight',
	'bobbinEndDiameter',
	'bobbinTraverse',
	'bobbinFlange',
	'guideStops',
	'spool',
	'packingKey',
	'packing',
	'packingHalfWidth',
	/** The packing's text that was fitted from widths; it is measured while the field still says that. */
	'packingMeasured',
	'wiring',
	'coilSpacing',
	'magnetMaterial',
	'magnetShape',
	'magnetCharged',
	'magnetAged',
	'coreKey',
	'permeability',
	/** As `packingMeasured`. */
	'permeabilityMeasured',
	'leadsWords',
	'leadsLength',
	'coverKey',
	'coverWords',
	'potting',
	'lookEvery',
	'firstLook',
	'volumePot',
	'volumeTaper',
	'tonePot',
	'toneTaper',
	'toneCap',
	'cableLength',
	'cableFPerM',
	'input',
	'coilF',
	'loss',
	'notes'
] as const;
type PlainField = (typeof plainFields)[number];

export type SpecField = PlainField | WireField | CoilField;
export type SpecTyped = Record<SpecField, string>;
export type SpecErrors = Partial<Record<SpecField, string>>;

const coilFieldsOf = (no: 1 | 2): CoilField[] => coilParts.map((part): CoilField => `coil${no}${part}`);

const shownFirst = [
	'name',
	'kind',
	'coilCount',
	'coil1Turns',
	'coil2Turns',
	'wireSize',
	'wireGrade',
	'wireOverall',
	'wireMaterial',
	'spool',
	'wireDiameter',
	'wireBasis',
	'wireOverallMin',
	'wireOverallMax',
	'wireOhmPerM',
	'packingKey',
	'packing',
	'packingHalfWidth',
	'packingMeasured',
	'bobbinGeneric',
	'bobbinName',
	'bobbinStraight',
	'bobbinEndDiameter',
	'bobbinTraverse',
	'bobbinFlange',
	'guideStops'
] as const satisfies SpecField[];

/** Every field once, in the order in which the form shows them. */
export const specFields: readonly SpecField[] = [
	...new Set<SpecField>([...shownFirst, ...coilFieldsOf(1), ...coilFieldsOf(2), ...plainFields, ...wireFields])
];

/** The choice of what is in no list of ours. */
export const own = 'own';

type Options<Value extends string = string> = readonly { value: Value; label: string }[];

export const kindLabels: Readonly<Record<SpecKind, string>> = {
	'one-coil': 'one coil',
	'two-coils': 'two coils',
	'wide-one-coil': 'wide, one coil',
	other: 'other'
};
export const kindOptions: Options<SpecKind> = kinds.map((value) => ({ value, label: kindLabels[value] }));
export const coilCountOptions: Options<'1' | '2'> = [
	{ value: '1', label: 'one' },
	{ value: '2', label: 'two' }
];
export const directionOptions: Options<SpecCoil['direction']> = [
	{ value: 'counter-clockwise', label: 'counter-clockwise ↺' },
	{ value: 'clockwise', label: 'clockwise ↻' }
];
export const poleOptions: Options<SpecCoil['pole']> = [
	{ value: 'north-up', label: 'north up' },
	{ value: 'south-up', label: 'south up' }
];
export const hotOptions: Options<SpecCoil['hot']> = [
	{ value: 'start', label: 'start' },
	{ value: 'finish', label: 'finish' }
];
export const wiringOptions: Options<SpecContent['wiring']> = [
	{ value: 'series', label: 'in series' },
	{ value: 'parallel', label: 'in parallel' },
	{ value: 'single', label: 'the first alone' }
];
export const magnetShapeOptions: Options<SpecContent['magnet']['shape']> = [
	{ value: 'bar', label: 'bar' },
	{ value: 'rods', label: 'rods' },
	{ value: 'other', label: 'other' },
	{ value: 'none', label: 'none' }
];
export const taperOptions: Options<'audio' | 'linear'> = [
	{ value: 'audio', label: 'audio' },
	{ value: 'linear', label: 'linear' }
];
const listed = (of: readonly { key: string; name: string }[]) =>
	of.map(({ key, name }) => ({ value: key, label: name }));
export const packingOptions: Options = [...listed(packings), { value: own, label: 'another way' }];
export const coreOptions: Options = [...listed(cores), { value: own, label: 'other cores' }];
export const coverOptions: Options = [...listed(covers), { value: own, label: 'another cover' }];
export const bobbinOptions: Options = [...listed(genericBobbins), { value: own, label: 'this workshop’s own' }];

const coilLabels: Readonly<Record<CoilPart, string>> = {
	Name: 'Name of the coil',
	Turns: 'Turns',
	Direction: 'The wire goes on',
	Start: 'Start',
	Finish: 'Finish',
	Tolerance: 'On count within ±',
	Pole: 'Pole that faces the strings',
	Hot: 'Hot lead'
};

/** As each field is called, on the form and in a refusal. */
export const specLabels: Readonly<Record<SpecField, string>> = {
	...wireLabels,
	name: 'Name',
	kind: 'Kind',
	coilCount: 'Coils',
	stringSpacing: 'String spacing',
	stringRadius: 'Radius of the strings',
	mounting: 'Mounting',
	bobbinName: 'Bobbin',
	bobbinGeneric: 'Figures of',
	bobbinStraight: 'Core, straight length',
	bobbinEndDiameter: 'Core, width',
	bobbinTraverse: 'Traverse',
	bobbinFlange: 'Flange, width',
	guideStops: 'Guide stops',
	spool: 'Spool',
	packingKey: 'How it is wound',
	packing: 'Packing',
	packingHalfWidth: 'Packing may be off by',
	packingMeasured: 'Packing that was measured',
	wiring: 'Coils joined',
	coilSpacing: 'Between the coils’ middles',
	magnetMaterial: 'Magnet',
	magnetShape: 'Shape',
	magnetCharged: 'Charged',
	magnetAged: 'Aged to',
	coreKey: 'Cores',
	permeability: 'Inductance times',
	permeabilityMeasured: 'Inductance that was measured',
	leadsWords: 'Leads',
	leadsLength: 'Length of the leads',
	coverKey: 'Cover',
	coverWords: 'Cover, in words',
	potting: 'Potting',
	lookEvery: 'Look every',
	firstLook: 'First look at',
	volumePot: 'Volume pot',
	volumeTaper: 'Volume taper',
	tonePot: 'Tone pot',
	toneTaper: 'Tone taper',
	toneCap: 'Tone capacitor',
	cableLength: 'Cable, length',
	cableFPerM: 'Cable, capacitance',
	input: 'Input it plays into',
	coilF: 'Self-capacitance',
	loss: 'Loss across the coil',
	notes: 'Notes',
	...(Object.fromEntries(
		([1, 2] as const).flatMap((no) => coilParts.map((part) => [`coil${no}${part}`, coilLabels[part]]))
	) as Record<CoilField, string>)
};

/** Closer looks stop the hands more than they help. */
export const lookEveryMin = 10;

/** Of pots, inputs and losses as they are typed: above it nothing in a guitar is told from none. */
const loadOhmMax = 1e8;

type MeasuredField =
	| 'stringSpacing'
	| 'stringRadius'
	| 'bobbinStraight'
	| 'bobbinEndDiameter'
	| 'bobbinTraverse'
	| 'bobbinFlange'
	| 'packing'
	| 'packingHalfWidth'
	| 'coilSpacing'
	| 'permeability'
	| 'leadsLength'
	| 'volumePot'
	| 'tonePot'
	| 'toneCap'
	| 'cableLength'
	| 'cableFPerM'
	| 'input'
	| 'coilF'
	| 'loss';

/** How each measured field is read and written for one person. */
export function specMeasures(units: UnitPreference): Record<MeasuredField, Measure> & ReturnType<typeof wireMeasures> {
	const length = (field: MeasuredField, range: readonly [number, number], empty: string | null = null) =>
		measure(specLabels[field], 'length', units.length, range, empty);
	const long = (field: MeasuredField) =>
		measure(specLabels[field], 'length', wireLengthUnit(units), specLimits.cableLengthM);
	const part = (field: MeasuredField, range: readonly [number, number]) =>
		measure(specLabels[field], 'part', 'one', range);
	const ohm = (field: MeasuredField, [least]: readonly [number, number], empty: string | null = null) =>
		measure(specLabels[field], 'resistance', units.resistance, [least, loadOhmMax], empty);
	return {
		...wireMeasures(units),
		stringSpacing: length('stringSpacing', specLimits.stringSpacingM, 'not said'),
		stringRadius: length('stringRadius', specLimits.stringRadiusM, 'flat'),
		bobbinStraight: length('bobbinStraight', limits['bobbin.straightM']),
		bobbinEndDiameter: length('bobbinEndDiameter', limits['bobbin.endDiameterM']),
		bobbinTraverse: length('bobbinTraverse', limits['bobbin.traverseM']),
		bobbinFlange: length('bobbinFlange', limits['bobbin.flangeOuterM'], 'no flange'),
		packing: part('packing', limits.packing),
		packingHalfWidth: part('packingHalfWidth', specLimits.packingHalfWidth),
		coilSpacing: length('coilSpacing', limits.spacingM, 'side by side with hardly a gap'),
		permeability: part('permeability', limits.effectivePermeability),
		leadsLength: long('leadsLength'),
		volumePot: ohm('volumePot', limits['load.volumePotOhm']),
		tonePot: ohm('tonePot', limits['load.tonePotOhm'], 'no tone control'),
		toneCap: measure(specLabels.toneCap, 'capacitance', 'nanofarad', limits['load.toneCapF']),
		cableLength: long('cableLength'),
		cableFPerM: perLengthMeasure(specLabels.cableFPerM, units.length === 'inch' ? 'ft' : 'm', specLimits.cableFPerM),
		input: ohm('input', limits['load.inputOhm']),
		coilF: measure(specLabels.coilF, 'capacitance', 'picofarad', limits['load.coilF'], 'by the packing'),
		loss: ohm('loss', limits['load.lossOhm'], 'none')
	};
}

const coilsOfKind: Readonly<Record<SpecKind, 1 | 2 | null>> = {
	'one-coil': 1,
	'two-coils': 2,
	'wide-one-coil': 1,
	// As many as are chosen.
	other: null
};

/** How many coils the fields as they stand make. The second coil's texts stay in their fields when one is meant. */
export function coilsTyped(typed: Pick<SpecTyped, 'kind' | 'coilCount'>): 1 | 2 {
	const byKind = coilsOfKind[typed.kind as SpecKind];
	return byKind ?? (typed.coilCount === '2' ? 2 : 1);
}

/** A second coil where the spec has but one: what such a coil usually is, with the turns of the first. */
function secondCoil(content: SpecContent): SpecCoil {
	return content.coils[1] ?? { ...startingSpec('two-coils', '-').coils[1]!, turns: content.coils[0]!.turns };
}

function writeCoil(coil: SpecCoil, no: 1 | 2): Record<CoilField, string> {
	const texts: Record<CoilPart, string> = {
		Name: coil.name,
		Turns: wholeText(coil.turns),
		Direction: coil.direction,
		Start: coil.start,
		Finish: coil.finish,
		Tolerance: wholeText(coil.toleranceTurns),
		Pole: coil.pole,
		Hot: coil.hot
	};
	return Object.fromEntries(coilParts.map((part) => [`coil${no}${part}`, texts[part]])) as Record<CoilField, string>;
}

/** The texts of every field. */
export function writeSpec(content: SpecContent, units: UnitPreference): SpecTyped {
	const measures = specMeasures(units);
	const text = (field: MeasuredField, si: number | null) => (si === null ? '' : measures[field].write(si));
	const { strings, bobbin, packing, magnet, cores: core, leads, cover, looks, load } = content;
	return {
		...writeWire(content.wire, units),
		...writeCoil(content.coils[0]!, 1),
		...writeCoil(secondCoil(content), 2),
		name: content.name,
		kind: content.kind,
		coilCount: String(content.coils.length),
		stringSpacing: text('stringSpacing', strings.spacingM),
		stringRadius: text('stringRadius', strings.radiusM),
		mounting: content.mounting,
		bobbinName: bobbin.name,
		bobbinGeneric: bobbin.generic ?? own,
		bobbinStraight: text('bobbinStraight', bobbin.straightM),
		bobbinEndDiameter: text('bobbinEndDiameter', bobbin.endDiameterM),
		bobbinTraverse: text('bobbinTraverse', bobbin.traverseM),
		bobbinFlange: text('bobbinFlange', bobbin.flangeOuterM),
		guideStops: bobbin.guideStops,
		spool: content.spoolId ?? '',
		packingKey: packing.key,
		packing: text('packing', packing.value),
		packingHalfWidth: text('packingHalfWidth', packing.halfWidth),
		packingMeasured: packing.measured ? text('packing', packing.value) : '',
		wiring: content.wiring,
		coilSpacing: text('coilSpacing', content.coilSpacingM),
		magnetMaterial: magnet.material,
		magnetShape: magnet.shape,
		magnetCharged: magnet.charged,
		magnetAged: magnet.aged,
		coreKey: core.key,
		permeability: text('permeability', core.effectivePermeability),
		permeabilityMeasured: core.measured ? text('permeability', core.effectivePermeability) : '',
		leadsWords: leads.words,
		leadsLength: text('leadsLength', leads.lengthM),
		coverKey: cover.key,
		coverWords: cover.words,
		potting: content.potting,
		lookEvery: wholeText(looks.every),
		firstLook: wholeText(looks.first),
		volumePot: text('volumePot', load.volumePotOhm),
		volumeTaper: load.volumeTaper,
		tonePot: text('tonePot', load.tonePotOhm),
		toneTaper: load.toneTaper,
		toneCap: text('toneCap', load.toneCapF),
		cableLength: text('cableLength', load.cableLengthM),
		cableFPerM: text('cableFPerM', load.cableFPerM),
		input: text('input', load.inputOhm),
		coilF: text('coilF', load.coilF),
		loss: text('loss', load.lossOhm),
		notes: content.notes
	};
}

const genericOf = (key: string) => genericBobbins.find((each) => each.key === key);

/** What choosing a generic bobbin fills in; another choice fills nothing. */
export function fillBobbin(typed: SpecTyped, units: UnitPreference): SpecTyped {
	const generic = genericOf(typed.bobbinGeneric);
	if (!generic) return typed;
	return bobbinFrom({ name: generic.name, ...generic.bobbin, generic: generic.key }, typed, units);
}

/** The figures of a bobbin, this workshop's or a generic one, in place of those typed. Guide stops stay unless it has its own. */
export function bobbinFrom(
	bobbin: Omit<SpecContent['bobbin'], 'guideStops'> & { guideStops?: string },
	typed: SpecTyped,
	units: UnitPreference
): SpecTyped {
	const measures = specMeasures(units);
	return {
		...typed,
		bobbinGeneric: bobbin.generic ?? own,
		bobbinName: bobbin.name,
		bobbinStraight: measures.bobbinStraight.write(bobbin.straightM),
		bobbinEndDiameter: measures.bobbinEndDiameter.write(bobbin.endDiameterM),
		bobbinTraverse: measures.bobbinTraverse.write(bobbin.traverseM),
		bobbinFlange: bobbin.flangeOuterM === null ? '' : measures.bobbinFlange.write(bobbin.flangeOuterM),
		guideStops: bobbin.guideStops || typed.guideStops
	};
}

/** What choosing a way of winding fills in: the usual packing and how far it may be off. */
export function fillPacking(typed: SpecTyped, units: UnitPreference): SpecTyped {
	const way = packings.find(({ key }) => key === typed.packingKey);
	if (!way) return typed;
	const { packing, packingHalfWidth } = specMeasures(units);
	return {
		...typed,
		packing: packing.write(way.usual),
		packingHalfWidth: packingHalfWidth.write((way.max - way.min) / 2)
	};
}

/** What choosing cores fills in: by how much they usually multiply the inductance. */
export function fillCores(typed: SpecTyped, units: UnitPreference): SpecTyped {
	const core = cores.find(({ key }) => key === typed.coreKey);
	return core ? { ...typed, permeability: specMeasures(units).permeability.write(core.usual) } : typed;
}

/** What choosing a cover fills in: its usual loss. */
export function fillCover(typed: SpecTyped, units: UnitPreference): SpecTyped {
	const cover = covers.find(({ key }) => key === typed.coverKey);
	if (!cover) return typed;
	return { ...typed, loss: cover.lossOhm === null ? '' : specMeasures(units).loss.write(cover.lossOhm) };
}

/** What another kind brings with it: two coils are joined in series until somebody says otherwise. */
export function fillKind(typed: SpecTyped, coilsBefore: 1 | 2): SpecTyped {
	const coils = coilsTyped(typed);
	return coils === 2 && coilsBefore === 1 && typed.wiring === 'single' ? { ...typed, wiring: 'series' } : typed;
}

/**
 * For a form sent without scripts: where something else was chosen and the figures that go with it were left as they were,
 * the usual figures of the new choice are meant.
 */
export function fillChosen(typed: SpecTyped, units: UnitPreference, base: SpecContent): SpecTyped {
	const before = writeSpec(base, units);
	const chose = (choice: SpecField, ...left: SpecField[]) =>
		typed[choice] !== before[choice] && left.every((field) => typed[field] === before[field]);
	let filled: SpecTyped = fillChosenWire(typed, units, base.wire);
	filled = fillKind(filled, base.coils.length === 2 ? 2 : 1);
	if (chose('bobbinGeneric', 'bobbinStraight', 'bobbinEndDiameter', 'bobbinTraverse', 'bobbinFlange')) {
		const name = typed.bobbinName === before.bobbinName ? {} : { bobbinName: typed.bobbinName };
		filled = { ...fillBobbin(filled, units), ...name };
	}
	if (chose('packingKey', 'packing', 'packingHalfWidth')) filled = fillPacking(filled, units);
	if (chose('coreKey', 'permeability')) filled = fillCores(filled, units);
	if (chose('coverKey', 'loss')) filled = fillCover(filled, units);
	return filled;
}

export type SpecRead = { ok: true; content: SpecContent } | { ok: false; errors: SpecErrors; partial: SpecContent };

/**
 * Typed fields to what a spec says, SI.
 *
 * @param base what the fields were written from: an unchanged text keeps its exact value. null: nothing before
 * @param last the value a refused field has in `partial`, so that the figures go on from what could be read last
 */
export function readSpec(
	typed: SpecTyped,
	units: UnitPreference,
	base: SpecContent | null,
	last: SpecContent | null = base
): SpecRead {
	const measures = specMeasures(units);
	const before = base && writeSpec(base, units);
	const kind = kinds.find((each) => each === typed.kind) ?? last?.kind ?? 'one-coil';
	const fallback = last ?? startingSpec(kind, '-');
	const errors: SpecErrors = {};

	/** Of two coils each refusal says which it is about. */
	const label = (field: SpecField): string => {
		const no = /^coil([12])/.exec(field)?.[1];
		const coil = no === '2' || (no === '1' && coilsTyped(typed) === 2) ? typedLine(typed[`coil${no}Name`]) : '';
		return coil === '' ? specLabels[field] : `${coil}, ${specLabels[field].toLowerCase()}`;
	};
	const measured = (
		field: MeasuredField,
		of: (content: SpecContent) => number | null,
		listed: number | null = null
	): number | null => {
		if (base && before && typed[field] === before[field]) return of(base);
		// A listed figure in another unit is six digits of it; the figure itself is meant.
		if (listed !== null && typed[field] === measures[field].write(listed)) return listed;
		const read = readMeasure(typed[field], measures[field]);
		if (read.ok) return read.value;
		errors[field] = read.sentence;
		return of(fallback);
	};
	const sized = (field: MeasuredField, of: (content: SpecContent) => number, listed: number | null = null): number =>
		measured(field, of, listed) ?? of(fallback);
	const choice = <Value extends string>(field: SpecField, options: Options<Value>, otherwise: Value): Value => {
		const read = readChoice(typed[field], label(field), options);
		if (read.ok) return read.value;
		errors[field] = read.sentence;
		return otherwise;
	};
	/** A key of a list of ours; what a stored spec has stays even where the list has changed since. */
	const key = (field: 'packingKey' | 'coreKey' | 'coverKey', options: Options, of: (content: SpecContent) => string) =>
		base && typed[field] === of(base) ? of(base) : choice(field, options, of(fallback));
	const words = (field: SpecField, of: (content: SpecContent) => string, least = 0, most: number = textMax.line) => {
		if (base && before && typed[field] === before[field]) return of(base);
		const text = field === 'notes' ? typedText(typed[field]) : typedLine(typed[field]);
		const long = lengthOf(text);
		if (long >= least && long <= most) return text;
		const range = least > 0 ? `${least} to ${most}` : `up to ${wholeText(most)}`;
		const kept = long === 0 ? 'nothing was typed.' : `${wholeText(long)} were kept as typed.`;
		errors[field] = `${label(field)}: ${range} characters; ${kept}`;
		return of(fallback);
	};
	const whole = (field: SpecField, [min, max]: readonly [number, number], otherwise: number): number => {
		const value = typedWhole(typed[field], ['turns', 'turn']);
		if (value !== null && value >= min && value <= max) return value;
		errors[field] = `${label(field)}: ${wholeText(min)} to ${wholeText(max)} turns; ${keptAsTyped(typed[field])}`;
		return otherwise;
	};

	const readCoil = (no: 1 | 2): SpecCoil => {
		const of = (content: SpecContent) => (no === 1 ? content.coils[0]! : secondCoil(content));
		const { turns, direction, toleranceTurns, pole, hot } = of(fallback);
		return {
			name: words(`coil${no}Name`, (content) => of(content).name, 1, textMax.name),
			turns: whole(`coil${no}Turns`, [1, turnsMax], turns),
			direction: choice(`coil${no}Direction`, directionOptions, direction),
			start: words(`coil${no}Start`, (content) => of(content).start),
			finish: words(`coil${no}Finish`, (content) => of(content).finish),
			toleranceTurns: whole(`coil${no}Tolerance`, specLimits.toleranceTurns, toleranceTurns),
			pole: choice(`coil${no}Pole`, poleOptions, pole),
			hot: choice(`coil${no}Hot`, hotOptions, hot)
		};
	};

	const wire = readWire(typed, units, base?.wire ?? null, last?.wire ?? null);
	if (!wire.ok) Object.assign(errors, wire.errors);
	const coils = coilsTyped(typed) === 2 ? [readCoil(1), readCoil(2)] : [readCoil(1)];
	const generic = genericOf(typed.bobbinGeneric);
	const content: SpecContent = {
		name: words('name', (each) => each.name, 1, textMax.name),
		kind: choice('kind', kindOptions, kind),
		strings: {
			spacingM: measured('stringSpacing', (each) => each.strings.spacingM),
			radiusM: measured('stringRadius', (each) => each.strings.radiusM)
		},
		mounting: words('mounting', (each) => each.mounting),
		bobbin: {
			name: words('bobbinName', (each) => each.bobbin.name, 1, textMax.name),
			generic: null,
			straightM: sized('bobbinStraight', (each) => each.bobbin.straightM, generic?.bobbin.straightM),
			endDiameterM: sized('bobbinEndDiameter', (each) => each.bobbin.endDiameterM, generic?.bobbin.endDiameterM),
			traverseM: sized('bobbinTraverse', (each) => each.bobbin.traverseM, generic?.bobbin.traverseM),
			flangeOuterM: measured('bobbinFlange', (each) => each.bobbin.flangeOuterM, generic?.bobbin.flangeOuterM),
			guideStops: words('guideStops', (each) => each.bobbin.guideStops)
		},
		wire: wire.ok ? wire.wire : wire.partial,
		spoolId: typed.spool === '' ? null : typed.spool,
		packing: {
			key: key('packingKey', packingOptions, (each) => each.packing.key),
			value: sized('packing', (each) => each.packing.value),
			halfWidth: sized('packingHalfWidth', (each) => each.packing.halfWidth),
			measured: typed.packingMeasured !== '' && typed.packingMeasured === typed.packing
		},
		coils,
		wiring: coils.length === 2 ? choice('wiring', wiringOptions, 'series') : 'single',
		coilSpacingM: coils.length === 2 ? measured('coilSpacing', (each) => each.coilSpacingM) : null,
		magnet: {
			material: words('magnetMaterial', (each) => each.magnet.material),
			shape: choice('magnetShape', magnetShapeOptions, fallback.magnet.shape),
			charged: words('magnetCharged', (each) => each.magnet.charged),
			aged: words('magnetAged', (each) => each.magnet.aged)
		},
		cores: {
			key: key('coreKey', coreOptions, (each) => each.cores.key),
			effectivePermeability: sized('permeability', (each) => each.cores.effectivePermeability),
			measured: typed.permeabilityMeasured !== '' && typed.permeabilityMeasured === typed.permeability
		},
		leads: {
			words: words('leadsWords', (each) => each.leads.words),
			lengthM: sized('leadsLength', (each) => each.leads.lengthM)
		},
		cover: {
			key: key('coverKey', coverOptions, (each) => each.cover.key),
			words: words('coverWords', (each) => each.cover.words)
		},
		potting: words('potting', (each) => each.potting),
		looks: {
			every: whole('lookEvery', specLimits.lookEvery, fallback.looks.every),
			first: whole('firstLook', specLimits.firstLook, fallback.looks.first)
		},
		load: {
			volumePotOhm: sized('volumePot', (each) => each.load.volumePotOhm),
			volumeTaper: choice('volumeTaper', taperOptions, fallback.load.volumeTaper),
			tonePotOhm: measured('tonePot', (each) => each.load.tonePotOhm),
			toneTaper: choice('toneTaper', taperOptions, fallback.load.toneTaper),
			toneCapF: sized('toneCap', (each) => each.load.toneCapF),
			cableLengthM: sized('cableLength', (each) => each.load.cableLengthM),
			cableFPerM: sized('cableFPerM', (each) => each.load.cableFPerM),
			inputOhm: sized('input', (each) => each.load.inputOhm),
			coilF: measured('coilF', (each) => each.load.coilF),
			lossOhm: measured('loss', (each) => each.load.lossOhm)
		},
		notes: words('notes', (each) => each.notes, 0, textMax.notes)
	};
	if (generic && isGeneric(content.bobbin, generic.bobbin, base, generic.key)) content.bobbin.generic = generic.key;

	// What only two fields together can be wrong about. The figures go on: nothing of it is reckoned with.
	const fewest = Math.min(...coils.map(({ turns }) => turns));
	for (const field of ['lookEvery', 'firstLook'] as const) {
		const value = field === 'lookEvery' ? content.looks.every : content.looks.first;
		if (errors[field] !== undefined || value === 0 || (value >= lookEveryMin && value <= fewest)) continue;
		errors[field] =
			`${specLabels[field]}: 0 for none, or ${wholeText(lookEveryMin)} to ${turnsText(fewest)}, no more than the coil has; ${quoted(typed[field])} was kept as typed.`;
	}
	const { flangeOuterM, endDiameterM } = content.bobbin;
	if (flangeOuterM !== null && flangeOuterM < endDiameterM) {
		errors.bobbinFlange ??= `${specLabels.bobbinFlange}: over all, so at least the core’s width, ${measures.bobbinFlange.tell(endDiameterM, 4)}, or empty for no flange; ${quoted(typed.bobbinFlange)} was kept as typed.`;
		content.bobbin.flangeOuterM = null;
	}
	return Object.keys(errors).length === 0 ? { ok: true, content } : { ok: false, errors, partial: content };
}

/** The figures are still those of the generic bobbin, or those under which a stored spec was called so. */
function isGeneric(
	bobbin: SpecContent['bobbin'],
	figures: (typeof genericBobbins)[number]['bobbin'],
	base: SpecContent | null,
	key: string
): boolean {
	const same = (other: Omit<SpecContent['bobbin'], 'name' | 'generic' | 'guideStops'>) =>
		bobbin.straightM === other.straightM &&
		bobbin.endDiameterM === other.endDiameterM &&
		bobbin.traverseM === other.traverseM &&
		bobbin.flangeOuterM === other.flangeOuterM;
	return same(figures) || (base !== null && base.bobbin.generic === key && same(base.bobbin));
}

/** Where the computation's refusals belong on the form. */
const fieldOfRefusal: Readonly<Record<string, SpecField>> = {
	'bobbin.straightM': 'bobbinStraight',
	'bobbin.endDiameterM': 'bobbinEndDiameter',
	'bobbin.traverseM': 'bobbinTraverse',
	'bobbin.flangeOuterM': 'bobbinFlange',
	'wire.diameterM': 'wireDiameter',
	'wire.overallDiameterM': 'wireOverall',
	'wire.ohmPerM': 'wireOhmPerM',
	packing: 'packing',
	turns: 'coil1Turns',
	'turns[0]': 'coil1Turns',
	'turns[1]': 'coil2Turns',
	'turns.length': 'coilCount',
	spacingM: 'coilSpacing',
	effectivePermeability: 'permeability',
	straightM: 'bobbinStraight',
	endDiameterM: 'bobbinEndDiameter',
	traverseM: 'bobbinTraverse',
	windingDepthM: 'coil1Turns',
	'load.volumePotOhm': 'volumePot',
	'load.tonePotOhm': 'tonePot',
	'load.toneCapF': 'toneCap',
	'load.cableF': 'cableFPerM',
	'load.inputOhm': 'input',
	'load.coilF': 'coilF',
	'load.lossOhm': 'loss',
	'halfWidths.diameterM': 'wireDiameter',
	'halfWidths.overallDiameterM': 'wireOverallMax',
	'halfWidths.packing': 'packingHalfWidth',
	'halfWidths.permeabilityPart': 'permeability'
};

/**
 * What the computation refuses of fields that were each fine by themselves, under the field it is about.
 *
 * @throws RangeError for a refusal of something no spec holds: the program asked for it
 */
export function refusalErrors(refused: Refused, units: UnitPreference): SpecErrors {
	const field = fieldOfRefusal[refused.field];
	if (!field) throw new RangeError(`No field of a spec is ${refused.field}.`);
	return { [field]: refusedSentence(refused, units) };
}
