import { describe, expect, it } from 'vitest';
import { kinds, specContent } from './content.ts';
import { fullTurnsOf, leadsOhm, predictSpec, specTogether } from './model.ts';
import { startingSpec } from './start.ts';

describe('a new spec', () => {
	it.each(kinds)('of the kind %s fits the schema and is predicted', (kind) => {
		const content = startingSpec(kind, 'Evening bridge');
		expect(specContent.parse(content)).toEqual(content);
		const predicted = predictSpec(content);
		if (!predicted.ok) throw new Error(`${predicted.field} ${predicted.got}`);
		// Generic figures of pickups, from memory: kilohms, and henries below ten.
		expect(predicted.value.figures.resistanceOhm.value).toBeGreaterThan(5000);
		expect(predicted.value.figures.resistanceOhm.value).toBeLessThan(9000);
		expect(predicted.value.figures.inductanceH.value).toBeLessThan(10);
		expect(predicted.value.peakHz).not.toBeNull();
	});

	it.each(kinds)('of the kind %s fits its bobbin', (kind) => {
		const content = startingSpec(kind, 'Evening bridge');
		for (const coil of content.coils) expect(fullTurnsOf(content)).toBeGreaterThan(coil.turns);
	});

	it('of two coils cancels hum and is in phase', () => {
		expect(specTogether(startingSpec('two-coils', 'Evening bridge'))).toEqual({ humCancelling: true, inPhase: true });
	});

	it('has leads that add less than a meter of three and a half digits shows', () => {
		const content = startingSpec('two-coils', 'Evening bridge');
		const predicted = predictSpec(content);
		if (!predicted.ok) throw new Error(predicted.field);
		// One count of such a meter's 20 kΩ range is 10 Ω.
		expect(leadsOhm(content)).toBeLessThan(1);
		expect(leadsOhm(content)).toBeGreaterThan(0.05);
		expect(leadsOhm(content) / predicted.value.figures.resistanceOhm.value).toBeLessThan(0.0001);
	});
});
