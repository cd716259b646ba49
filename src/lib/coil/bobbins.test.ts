import { expect, it } from 'vitest';
import { genericBobbins } from './bobbins.ts';
import { packings, windCoil } from './winding.ts';
import { awgDiameterM } from './wire.ts';

it.each(genericBobbins.map((generic) => [generic.name, generic] as const))(
	'%s holds its usual turns of AWG 42 within its flange',
	(_, { bobbin, packing, turns, spacingM }) => {
		const wire = { diameterM: awgDiameterM(42), overallDiameterM: 71e-6, ohmPerM: null };
		const coil = windCoil({ bobbin, packing, turns, wire, temperatureC: 20 });
		if (!coil.ok) throw new Error(coil.field);
		expect(coil.value.roomM).toBeGreaterThan(0);
		if (spacingM !== null) expect(spacingM).toBeGreaterThanOrEqual(bobbin.flangeOuterM!);
	}
);

it('every way of packing lies in its own range, looser by hand than in layers', () => {
	for (const { usual, min, max } of packings) {
		expect(usual).toBeGreaterThan(min);
		expect(usual).toBeLessThan(max);
	}
	const usual = packings.map((packing) => packing.usual);
	expect(usual).toEqual([...usual].sort((a, b) => a - b));
});
