import { describe, expect, it } from 'vitest';
import { z } from 'zod';
import { answerPrediction, predictionAnswer, predictionRequest } from './prediction-schema.ts';

const request = {
	bobbin: { straightM: 0.0508, endDiameterM: 0.006, traverseM: 0.0062, flangeOuterM: 0.0175 },
	wire: { awg: 42, diameterBasis: 'law', overallDiameterM: 71e-6 },
	packing: 0.8,
	turns: [4950, 4850],
	connection: 'series',
	temperatureC: 20,
	load: {
		volumePotOhm: 500e3,
		volume: 1,
		tonePotOhm: 500e3,
		toneCapF: 22e-9,
		tone: 1,
		cableF: 500e-12,
		inputOhm: 1e6,
		coilF: 110e-12
	},
	effectivePermeability: 2.4
};
const answered = (asked: unknown) => {
	const result = answerPrediction(predictionRequest.parse(asked));
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
};

describe('a request for a prediction', () => {
	it('is answered with every figure, in the shape the schema says', () => {
		const answer = answered(request);
		expect(predictionAnswer.parse(answer)).toEqual(answer);
		expect(answer.resistanceOhm).toBeCloseTo(7297.763, 2);
		expect(answer.resistanceUncertaintyOhm).toBe(answer.uncertainties.resistanceOhm.uncertainty);
		expect(answer.lengthM).toBeCloseTo(answer.coils[0]!.lengthM + answer.coils[1]!.lengthM, 9);
		expect(answer.copperMassKg).toBeCloseTo(answer.coils[0]!.copperMassKg + answer.coils[1]!.copperMassKg, 12);
		for (const key of ['meanTurnM', 'windingDepthM', 'outerLengthM', 'outerWidthM', 'copperFill'] as const)
			expect(answer[key]).toBe(answer.coils[0]![key]);
		expect(answer.peakHz).toBeGreaterThan(2000);
		expect(answer.uncertainties.peakHz!.parts[0]!.name).toBe('permeability');
	});

	it('survives JSON as it is', () => {
		const answer = answered(request);
		expect(JSON.parse(JSON.stringify(answer))).toEqual(answer);
	});

	it('without a load and iron needs neither', () => {
		const { load: _, effectivePermeability: __, ...plain } = request;
		const answer = answered(plain);
		expect(answer).toMatchObject({ peakHz: null, peakDb: null });
		expect(answer.inductanceH).toBe(answer.airInductanceH);
	});

	it('by the rounded table has the thinner wire of the table', () => {
		const table = answered({
			...request,
			wire: { ...request.wire, awg: 40, diameterBasis: 'table', overallDiameterM: 85e-6 }
		});
		const law = answered({ ...request, wire: { ...request.wire, awg: 40, overallDiameterM: 85e-6 } });
		expect(table.coils[0]!.resistanceOhm / table.coils[0]!.lengthM).toBeCloseTo(3.4411449 * 1.029, 2);
		expect(law.coils[0]!.resistanceOhm / law.coils[0]!.lengthM).toBeCloseTo(3.4411449, 6);
	});

	it('by a gauge the table does not hold, or enamel thinner than its wire, is refused by that field', () => {
		const wire = (other: object) => predictionRequest.parse({ ...request, wire: { ...request.wire, ...other } });
		expect(answerPrediction(wire({ awg: 38, diameterBasis: 'table', overallDiameterM: 2e-4 }))).toMatchObject({
			ok: false,
			field: 'wire.awg',
			min: 40,
			max: 44,
			got: 38
		});
		expect(answerPrediction(wire({ overallDiameterM: 50e-6 }))).toMatchObject({ field: 'wire.overallDiameterM' });
	});

	it.each([
		['bobbin.straightM', { bobbin: { ...request.bobbin, straightM: -1 } }],
		['bobbin.traverseM', { bobbin: { ...request.bobbin, traverseM: null } }],
		['packing', { packing: 2 }],
		['turns', { turns: [] }],
		['turns', { turns: [1, 2, 3] }],
		['turns.1', { turns: [5000, 1e9] }],
		['connection', { connection: 'both' }],
		['temperatureC', { temperatureC: '20' }],
		['load.volume', { load: { ...request.load, volume: 1.5 } }],
		['load.coilF', { load: { ...request.load, coilF: undefined } }],
		['wire.awg', { wire: { overallDiameterM: 71e-6 } }],
		['wire.awg', { wire: { ...request.wire, diameterM: 63e-6 } }],
		['effectivePermeability', { effectivePermeability: 1000 }],
		['', { extra: 1 }]
	])('with a bad %s says so', (field, other) => {
		const parsed = predictionRequest.safeParse({ ...request, ...other });
		expect(parsed.success).toBe(false);
		expect(parsed.error!.issues.map((issue) => issue.path.join('.'))).toEqual([field]);
	});

	it('names every bad field at once', () => {
		const parsed = predictionRequest.safeParse({ ...request, packing: 9, temperatureC: 900 });
		expect(parsed.error!.issues.map((issue) => issue.path.join('.'))).toEqual(['packing', 'temperatureC']);
	});

	it('and its answer can be described in JSON Schema', () => {
		const described = z.toJSONSchema(predictionRequest, { io: 'input' });
		expect(described.required).toEqual(['bobbin', 'wire', 'packing', 'turns', 'connection', 'temperatureC']);
		expect(z.toJSONSchema(predictionAnswer).properties).toHaveProperty('copperMassKg');
	});
});
