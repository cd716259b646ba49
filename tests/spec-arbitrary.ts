import fc from 'fast-check';
import { genericBobbins } from '../src/lib/coil/bobbins.ts';
import { cores } from '../src/lib/coil/inductance.ts';
import { limits } from '../src/lib/coil/limits.ts';
import { covers } from '../src/lib/coil/response.ts';
import { unitPreference, type UnitPreference } from '../src/lib/coil/units.ts';
import { packings } from '../src/lib/coil/winding.ts';
import { enamelMaterials, wireSizes, type EnamelMaterial } from '../src/lib/coil/wire.ts';
import {
	grades,
	specLimits,
	textMax,
	type SpecCoil,
	type SpecContent,
	type SpecKind,
	type SpecWire
} from '../src/lib/spec/content.ts';
import { genericBobbin, tableWire } from '../src/lib/spec/start.ts';
import { typedLine, typedText } from '../src/lib/typed-values.ts';

/** What specs may hold, for property tests. */

const { shape } = unitPreference;
export const anyUnits: fc.Arbitrary<UnitPreference> = fc.record({
	length: fc.constantFrom(...shape.length.options),
	wireDiameter: fc.constantFrom(...shape.wireDiameter.options),
	temperature: fc.constantFrom(...shape.temperature.options),
	resistance: fc.constantFrom(...shape.resistance.options),
	mass: fc.constantFrom(...shape.mass.options)
});

const part = (min: number, max: number) => fc.double({ min, max, noNaN: true });
/** Wires of the table and wires of one's own, with least and greatest or without. */
export const anyWire: fc.Arbitrary<SpecWire> = fc
	.record({
		size: fc.constantFrom(...wireSizes.map(({ key }) => key), null),
		grade: fc.constantFrom(...grades),
		material: fc.constantFrom(...(Object.keys(enamelMaterials) as EnamelMaterial[])),
		diameterM: part(limits['wire.diameterM'][0], limits['wire.diameterM'][1]),
		over: part(1.0001, 1.4),
		spread: fc.option(part(0, 0.1)),
		ohmPerM: fc.option(part(...limits['wire.ohmPerM'])),
		basis: fc.constantFrom('law' as const, 'table' as const)
	})
	.map(({ size, grade, material, diameterM, over, spread, ohmPerM, basis }) => {
		if (size !== null) return { ...tableWire(size, grade, material), ohmPerM };
		const overallDiameterM = diameterM * over;
		return {
			sizeKey: null,
			diameterM,
			diameterBasis: basis,
			grade,
			material,
			overallDiameterM,
			overallMinM:
				spread === null ? null : Math.max(limits['wire.overallDiameterM'][0], overallDiameterM * (1 - spread)),
			overallMaxM:
				spread === null ? null : Math.min(limits['wire.overallDiameterM'][1], overallDiameterM * (1 + spread)),
			ohmPerM
		};
	});

const word = (charactersMax: number = textMax.line) =>
	fc.string({ unit: 'grapheme', maxLength: Math.min(30, charactersMax) }).map(typedLine);
const named = word(textMax.name).map((text) => text || 'Evening bridge');

const anyCoil = (fewest: number): fc.Arbitrary<SpecCoil> =>
	fc.record({
		name: named,
		turns: fc.integer({ min: fewest, max: 12_000 }),
		direction: fc.constantFrom('counter-clockwise', 'clockwise'),
		start: word(),
		finish: word(),
		toleranceTurns: fc.integer({ min: specLimits.toleranceTurns[0], max: specLimits.toleranceTurns[1] }),
		pole: fc.constantFrom('north-up', 'south-up'),
		hot: fc.constantFrom('start', 'finish')
	});

const anyBobbin: fc.Arbitrary<SpecContent['bobbin']> = fc.oneof(
	fc.constantFrom(...genericBobbins.map(({ key }) => genericBobbin(key))),
	fc
		.record({
			name: named,
			straightM: part(...limits['bobbin.straightM']),
			endDiameterM: part(...limits['bobbin.endDiameterM']),
			traverseM: part(...limits['bobbin.traverseM']),
			beyond: fc.option(part(0, 0.3)),
			guideStops: word()
		})
		.map(({ beyond, ...bobbin }) => ({
			...bobbin,
			generic: null,
			flangeOuterM: beyond === null ? null : bobbin.endDiameterM + beyond
		}))
);

const look = fc.oneof(fc.constant(0), fc.integer({ min: 10, max: 500 }));

/** Specs of a kind as the form may make them: looks that the coils have turns for, joined coils only where there are two. */
export function anySpec(kind: SpecKind): fc.Arbitrary<SpecContent> {
	const two = kind === 'two-coils' ? fc.constant(true) : kind === 'other' ? fc.boolean() : fc.constant(false);
	return two.chain((isTwo) =>
		fc.record({
			name: named,
			kind: fc.constant(kind),
			strings: fc.record({
				spacingM: fc.option(part(...specLimits.stringSpacingM)),
				radiusM: fc.option(part(...specLimits.stringRadiusM))
			}),
			mounting: word(),
			bobbin: anyBobbin,
			wire: anyWire,
			spoolId: fc.option(fc.uuid()),
			packing: fc.record({
				key: fc.constantFrom(...packings.map(({ key }) => key), 'own'),
				value: part(...limits.packing),
				halfWidth: part(...specLimits.packingHalfWidth),
				measured: fc.boolean()
			}),
			coils: isTwo ? fc.tuple(anyCoil(500), anyCoil(500)) : fc.tuple(anyCoil(500)),
			wiring: isTwo ? fc.constantFrom('series', 'parallel', 'single') : fc.constant('single' as const),
			coilSpacingM: isTwo ? fc.option(part(...limits.spacingM)) : fc.constant(null),
			magnet: fc.record({
				material: word(),
				shape: fc.constantFrom('bar', 'rods', 'other', 'none'),
				charged: word(),
				aged: word()
			}),
			cores: fc.record({
				key: fc.constantFrom(...cores.map(({ key }) => key), 'own'),
				effectivePermeability: part(...limits.effectivePermeability),
				measured: fc.boolean()
			}),
			leads: fc.record({ words: word(), lengthM: part(...specLimits.cableLengthM) }),
			cover: fc.record({ key: fc.constantFrom(...covers.map(({ key }) => key), 'own'), words: word() }),
			potting: word(),
			looks: fc.record({ every: look, first: look }),
			load: fc.record({
				volumePotOhm: part(...limits['load.volumePotOhm']),
				volumeTaper: fc.constantFrom('audio', 'linear'),
				tonePotOhm: fc.option(part(...limits['load.tonePotOhm'])),
				toneTaper: fc.constantFrom('audio', 'linear'),
				toneCapF: part(...limits['load.toneCapF']),
				cableLengthM: part(...specLimits.cableLengthM),
				cableFPerM: part(...specLimits.cableFPerM),
				inputOhm: part(...limits['load.inputOhm']),
				coilF: fc.option(part(...limits['load.coilF'])),
				lossOhm: fc.option(part(...limits['load.lossOhm']))
			}),
			notes: fc.string({ unit: 'grapheme', maxLength: 60 }).map(typedText)
		})
	);
}
