import fc from 'fast-check';
import { limits } from '../src/lib/coil/limits.ts';
import { unitPreference, type UnitPreference } from '../src/lib/coil/units.ts';
import { enamelMaterials, wireSizes, type EnamelMaterial } from '../src/lib/coil/wire.ts';
import { grades, type SpecWire } from '../src/lib/spec/content.ts';
import { tableWire } from '../src/lib/spec/start.ts';

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
