import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { expectedBand, judge } from './band.ts';
import { calibrate } from './calibrate.ts';
import { airInductanceH, inductanceRatio, mutualBesideH, mutualStackedH, permeabilityFrom } from './inductance.ts';
import { difference, meterHalfWidthOhm, readingTo20C, rectangular } from './measurement.ts';
import { predict } from './predict.ts';
import { answerPrediction, predictionRequest } from './prediction-schema.ts';
import {
	coilCapacitanceF,
	fromTwoCapacitors,
	noteHz,
	peakOf,
	resonanceHz,
	responseDb,
	sweepHz,
	trackAt
} from './response.ts';
import {
	packingFromWidth,
	straightForPerimeter,
	turnsForFullBobbin,
	turnsForResistance,
	turnsForWireLeft,
	windCoil
} from './winding.ts';
import {
	areaM2,
	atTemperature,
	awgDiameterM,
	awgOfDiameter,
	awgTableDiameterM,
	copperKgPerM,
	diameterToleranceM,
	ohmPerM,
	tensionN,
	to20C
} from './wire.ts';

/** Every number anywhere in an answer is finite. */
function allFinite(answer: unknown, path = 'answer'): void {
	if (typeof answer === 'number') expect(Number.isFinite(answer), path).toBe(true);
	else if (Array.isArray(answer)) answer.forEach((each, i) => allFinite(each, `${path}[${i}]`));
	else if (answer !== null && typeof answer === 'object')
		for (const [key, each] of Object.entries(answer)) allFinite(each, `${path}.${key}`);
}

const odd = fc.constantFrom(NaN, Infinity, -Infinity, 0, -0, -1, 1e-320, 1e308, -1e308, Number.MIN_VALUE);
/** Mostly sensible, now and then anything at all, so that both what is computed and what is refused is seen. */
const near = (min: number, max: number) =>
	fc.oneof(
		{ weight: 200, arbitrary: fc.double({ min, max, noNaN: true }) },
		{ weight: 4, arbitrary: fc.constantFrom(min, max) },
		{ weight: 1, arbitrary: odd },
		{ weight: 1, arbitrary: fc.double() }
	);
const orNull = (arbitrary: fc.Arbitrary<number>) =>
	fc.oneof({ weight: 3, arbitrary }, { weight: 1, arbitrary: fc.constant(null) });

const bobbin = fc
	.record({
		straightM: near(0, 0.1),
		endDiameterM: near(0.002, 0.03),
		traverseM: near(0.004, 0.02),
		over: orNull(near(1, 5))
	})
	.map(({ over, ...rest }) => ({ ...rest, flangeOuterM: over === null ? null : rest.endDiameterM * over }));
const wire = fc
	.record({ diameterM: near(0.00001, 0.0001), over: near(1, 1.5), ohmPerM: orNull(near(0.001, 1000)) })
	.map(({ over, ...rest }) => ({ ...rest, overallDiameterM: rest.diameterM * over }));
const winding = fc.record({ bobbin, wire, packing: near(0.3, 1.15), temperatureC: near(-40, 150) });
const turns = near(1, 10_000);
const load = fc.record({
	coilF: near(0, 1e-9),
	lossOhm: orNull(near(10, 1e7)),
	volumePotOhm: near(100, 1e7),
	volume: near(0, 1),
	tonePotOhm: orNull(near(100, 1e7)),
	toneCapF: near(0, 1e-6),
	tone: near(0, 1),
	cableF: near(0, 1e-8),
	inputOhm: near(100, 1e7)
});
const circuit = fc
	.tuple(load, near(1e-9, 100), near(0, 1e5))
	.map(([rest, inductanceH, resistanceOhm]) => ({ ...rest, inductanceH, resistanceOhm }));
const connection = fc.constantFrom('series' as const, 'parallel' as const, 'single' as const);
const meter = fc.record({
	upToOhm: near(0, 1e6),
	percent: near(0, 20),
	counts: near(0, 100),
	ohmPerCount: near(0, 100)
});
const reading = fc.record({ ohm: near(0, 1e5), uncertaintyOhm: near(0, 1e3) });
const window = fc.record({
	straightM: near(0, 0.1),
	endDiameterM: near(1e-6, 0.1),
	windingDepthM: near(0, 0.05),
	traverseM: near(1e-6, 0.1)
});
const wound = fc.record({ window, turns });

describe('whatever is put in, no NaN and no infinity comes out', () => {
	// A failure is told as it came: shrinking it takes minutes and says no more.
	const holds = (name: string, numRuns: number, property: fc.IProperty<unknown[]> | fc.IProperty<[unknown]>) =>
		it(name, () => fc.assert(property as fc.IProperty<unknown>, { numRuns, endOnFailure: true }));

	holds(
		'of a winding',
		2000,
		fc.property(winding, turns, near(0, 0.1), (input, count, other) => {
			allFinite(windCoil({ ...input, turns: count }));
			allFinite(turnsForResistance(input, count));
			allFinite(turnsForFullBobbin(input, other));
			allFinite(turnsForWireLeft(input, other));
			allFinite(packingFromWidth({ ...input, turns: count }, other));
			allFinite(straightForPerimeter(other, input.bobbin.endDiameterM));
		}) as never
	);

	holds(
		'of an inductance',
		40,
		fc.property(wound, wound, near(0, 0.2), (first, second, apart) => {
			allFinite(airInductanceH(first.window, first.turns));
			allFinite(inductanceRatio(second.window, { ...second.window, windingDepthM: apart }));
			allFinite(mutualBesideH(first, second, apart));
			allFinite(mutualStackedH(first, { ...first, turns: second.turns }, apart));
			allFinite(permeabilityFrom(first.turns, second.turns));
		}) as never
	);

	holds(
		'of a response',
		1000,
		fc.property(circuit, fc.array(near(0, 1e5), { maxLength: 4 }), near(0, 1e-6), (asked, hertz, farad) => {
			allFinite(responseDb(asked, hertz));
			allFinite(peakOf(asked));
			const [a = 1, b = 1] = hertz;
			allFinite(fromTwoCapacitors({ addedF: farad, hz: a }, { addedF: asked.cableF, hz: b }));
			allFinite(sweepHz(a, b, 5));
		}) as never
	);

	holds(
		'of a reading',
		2000,
		fc.property(meter, reading, reading, near(-40, 150), near(0, 50), (range, a, b, celsius, half) => {
			allFinite(readingTo20C(a.ohm, celsius, half, range));
			const [first, second] = [a, b].map(({ ohm }) => ({ ohm, temperatureC: celsius }));
			allFinite(difference(first!, second!, half, range));
			allFinite(expectedBand(a));
			allFinite(judge(a, b));
		}) as never
	);

	it('of a prediction, calibrated or not, of which some are made and some refused', () => {
		const seen = { made: 0, refused: 0 };
		const property = fc.property(
			winding,
			fc.oneof(
				{ weight: 9, arbitrary: fc.array(turns, { minLength: 1, maxLength: 2 }) },
				{ weight: 1, arbitrary: fc.array(turns, { maxLength: 3 }) }
			),
			connection,
			fc.option(load),
			orNull(near(0.5, 20)),
			orNull(near(0.05, 0.5)),
			fc.array(fc.record({ ohmAt20C: near(100, 20_000), uncertaintyOhm: near(0, 100), meterOhm: near(0, 50) }), {
				maxLength: 3
			}),
			near(0, 0.3),
			(model, counts, joined, into, effectivePermeability, spacingM, coils, half) => {
				const kept = coils.map((coil) => ({ ...coil, turns: counts, connection: joined }));
				const halfWidths = { bobbinPart: half, airPart: half };
				const calibration = calibrate({ ...model, halfWidths }, kept);
				allFinite(calibration);
				const input = { ...model, halfWidths, turns: counts, connection: joined, effectivePermeability, spacingM };
				const answer = predict({ ...input, load: into, calibration: calibration.ok ? calibration.value : null });
				allFinite(answer);
				seen[answer.ok ? 'made' : 'refused'] += 1;
			}
		);
		fc.assert(property, { numRuns: 60, endOnFailure: true });
		expect(seen.made).toBeGreaterThan(5);
		expect(seen.refused).toBeGreaterThan(1);
	});

	holds(
		'of a request',
		50,
		fc.property(winding, fc.array(turns, { minLength: 1, maxLength: 2 }), connection, (model, counts, joined) => {
			const { flangeOuterM, ...core } = model.bobbin;
			const parsed = predictionRequest.safeParse({
				bobbin: flangeOuterM === null ? core : { ...core, flangeOuterM },
				wire: { diameterM: model.wire.diameterM, overallDiameterM: model.wire.overallDiameterM },
				packing: model.packing,
				temperatureC: model.temperatureC,
				turns: counts,
				connection: joined
			});
			if (parsed.success) allFinite(answerPrediction(parsed.data));
		}) as never
	);

	holds(
		'of the plain formulas, which stop instead',
		1000,
		fc.property(fc.oneof(odd, fc.double()), fc.oneof(odd, fc.double()), (a, b) => {
			const formulas: (() => unknown)[] = [
				() => awgDiameterM(a),
				() => awgOfDiameter(a),
				() => awgTableDiameterM(a),
				() => areaM2(a),
				() => atTemperature(a, b),
				() => to20C(a, b),
				() => ohmPerM(a, b),
				() => copperKgPerM(a),
				() => diameterToleranceM(a),
				() => tensionN(a),
				() => coilCapacitanceF(a),
				() => resonanceHz(a, b),
				() => trackAt(a, 'audio'),
				() => noteHz(a),
				() => rectangular(a),
				() => meterHalfWidthOhm({ upToOhm: 1, percent: a, counts: b, ohmPerCount: 1 }, 1)
			];
			for (const formula of formulas) {
				let answer: unknown;
				try {
					answer = formula();
				} catch (error) {
					expect(error).toBeInstanceOf(RangeError);
					continue;
				}
				allFinite(answer);
			}
		}) as never
	);
});
