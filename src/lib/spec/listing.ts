import type { UnitPreference } from '../coil/units.ts';
import type { SpecContent, SpecWire } from './content.ts';
import {
	bobbinOptions,
	coilCountOptions,
	coreOptions,
	coverOptions,
	directionOptions,
	hotOptions,
	kindLabels,
	kindOptions,
	magnetShapeOptions,
	packingOptions,
	poleOptions,
	specLabels,
	specMeasures,
	taperOptions,
	wiringOptions,
	writeSpec,
	type SpecField
} from './form.ts';
import type { Measure } from './measures.ts';
import { gradeOptions, materialOptions, wireBasisOptions, wireSizeOptions, wireWords } from './wire-form.ts';

/** A spec as a list to be read, on screen by who may not change it and on paper. Fields that say nothing are left out. */

export interface ListedGroup {
	title: string;
	rows: { label: string; value: string }[];
}

const turns = 'turns';

/** Fields that count turns. */
const counted: readonly SpecField[] = [
	'coil1Turns',
	'coil2Turns',
	'coil1Tolerance',
	'coil2Tolerance',
	'lookEvery',
	'firstLook'
];

const choices: Partial<Record<SpecField, readonly { value: string; label: string }[]>> = {
	kind: kindOptions,
	coilCount: coilCountOptions,
	bobbinGeneric: bobbinOptions,
	packingKey: packingOptions,
	coreKey: coreOptions,
	coverKey: coverOptions,
	wiring: wiringOptions,
	magnetShape: magnetShapeOptions,
	volumeTaper: taperOptions,
	toneTaper: taperOptions,
	wireSize: wireSizeOptions,
	wireBasis: wireBasisOptions,
	wireGrade: gradeOptions,
	wireMaterial: materialOptions,
	coil1Direction: directionOptions,
	coil2Direction: directionOptions,
	coil1Pole: poleOptions,
	coil2Pole: poleOptions,
	coil1Hot: hotOptions,
	coil2Hot: hotOptions
};

/** Groups as the form has them, without the coils. */
const groups: readonly { title: string; fields: readonly SpecField[] }[] = [
	{ title: 'Pickup', fields: ['kind', 'wiring', 'coilSpacing', 'stringSpacing', 'stringRadius', 'mounting'] },
	{
		title: 'Wire',
		fields: [
			'wireSize',
			'wireGrade',
			'wireMaterial',
			'wireDiameter',
			'wireBasis',
			'wireOverall',
			'wireOverallMin',
			'wireOverallMax',
			'wireOhmPerM',
			'spool'
		]
	},
	{ title: 'Packing', fields: ['packingKey', 'packing', 'packingHalfWidth'] },
	{
		title: 'Bobbin',
		fields: [
			'bobbinName',
			'bobbinGeneric',
			'bobbinStraight',
			'bobbinEndDiameter',
			'bobbinTraverse',
			'bobbinFlange',
			'guideStops'
		]
	},
	{
		title: 'Magnet and cores',
		fields: ['magnetMaterial', 'magnetShape', 'magnetCharged', 'magnetAged', 'coreKey', 'permeability']
	},
	{
		title: 'Leads, cover and potting',
		fields: ['leadsWords', 'leadsLength', 'coverKey', 'coverWords', 'potting']
	},
	{ title: 'Looks', fields: ['lookEvery', 'firstLook'] },
	{
		title: 'What it plays into',
		fields: [
			'volumePot',
			'volumeTaper',
			'tonePot',
			'toneTaper',
			'toneCap',
			'cableLength',
			'cableFPerM',
			'input',
			'coilF',
			'loss'
		]
	},
	{ title: 'Notes', fields: ['notes'] }
];

const coilParts = ['Turns', 'Direction', 'Start', 'Finish', 'Tolerance', 'Pole', 'Hot'] as const;

/**
 * @param spoolName of the spool it is reckoned with; null: none
 */
export function specListing(content: SpecContent, units: UnitPreference, spoolName: string | null): ListedGroup[] {
	const typed = writeSpec(content, units);
	const measures: Partial<Record<SpecField, Measure>> = specMeasures(units);
	const two = content.coils.length === 2;

	const said = (field: SpecField): string => {
		const text = typed[field];
		if (field === 'spool') return spoolName ?? '';
		if ((field === 'wiring' || field === 'coilSpacing') && !two) return '';
		// Metric sizes have no gauge to take a diameter by.
		if (field === 'wireBasis' && !typed.wireSize.startsWith('awg-')) return '';
		const options = choices[field];
		if (options) return options.find(({ value }) => value === text)?.label ?? text;
		if (counted.includes(field)) return text === '0' && /Look/.test(field) ? 'none' : `${text} ${turns}`;
		const measure = measures[field];
		if (!measure) return text;
		// A gauge is no size that a micrometer shows.
		if (field === 'wireDiameter' && text.startsWith('AWG'))
			return `${text}, ${measure.tell(content.wire.diameterM, 4)}`;
		if (text === '') return measure.empty ?? '';
		const unit = measure.symbol === '' ? text : `${text} ${measure.symbol}`;
		if (field === 'packing' && content.packing.measured) return `${unit}, measured`;
		if (field === 'permeability' && content.cores.measured) return `${unit}, measured`;
		return unit;
	};
	const rowsOf = (fields: readonly SpecField[]) =>
		fields.map((field) => ({ label: specLabels[field], value: said(field) })).filter(({ value }) => value !== '');

	const [pickup, ...rest] = groups.map(({ title, fields }) => ({ title, rows: rowsOf(fields) }));
	const coils = content.coils.map((coil, i) => ({
		title: coil.name,
		rows: rowsOf(coilParts.map((part): SpecField => `coil${i === 0 ? 1 : 2}${part}`))
	}));
	return [pickup!, ...coils, ...rest].filter(({ rows }) => rows.length > 0);
}

/**
 * One line under a spec's name: kind, wire, magnet, string spacing.
 *
 * @param spoolWire the spool's wire where one is reckoned with
 */
export function specSentence(content: SpecContent, units: UnitPreference, spoolWire: SpecWire | null = null): string {
	const { kind, coils, wiring, magnet, strings } = content;
	const wire = spoolWire ?? content.wire;
	const joined = coils.length === 2 ? `, ${wiringOptions.find(({ value }) => value === wiring)!.label}` : '';
	const shape = magnet.shape === 'none' || magnet.shape === 'other' ? '' : magnet.shape;
	const spacing =
		strings.spacingM === null ? '' : `strings ${specMeasures(units).stringSpacing.tell(strings.spacingM, 4)} apart`;
	const kindText = kind === 'other' ? (coils.length === 2 ? 'two coils' : 'one coil') : kindLabels[kind];
	const parts = [`${kindText}${joined}`, wireWords(wire, units), `${magnet.material} ${shape}`.trim(), spacing];
	const text = parts.filter((part) => part !== '').join('; ');
	return `${text.charAt(0).toUpperCase()}${text.slice(1)}.`;
}
