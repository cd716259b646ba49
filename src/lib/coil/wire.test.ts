import { describe, expect, it } from 'vitest';
import { predict } from './predict.ts';
import { genericBobbins } from './bobbins.ts';
import {
	atTemperature,
	awgDiameterM,
	awgOfDiameter,
	awgTableDiameterM,
	copperKgPerM,
	diameterToleranceM,
	enamelMaterials,
	leadOhmPerM,
	metresPerInch,
	ohmPerM,
	tensionN,
	to20C,
	windingWireConductivitySPerM,
	wireSizes
} from './wire.ts';

const inch = (value: number) => value * metresPerInch;

describe('the size of a gauge', () => {
	// ASTM B258 law; GNU units wiregauge(n).
	it.each([
		[40, 0.079871085],
		[41, 0.071127255],
		[42, 0.06334065],
		[43, 0.056406478],
		[44, 0.050231419]
	])('AWG %i is %f mm by the law', (gauge, mm) => {
		expect(Math.abs(awgDiameterM(gauge) * 1000 - mm)).toBeLessThan(1e-8);
	});

	// GNU units.
	it.each([
		[inch(0.0025), 41.978329],
		[0.063e-3, 42.04651]
	])('%f m is gauge %f', (diameterM, gauge) => {
		expect(Math.abs(awgOfDiameter(diameterM) - gauge)).toBeLessThan(1e-6);
	});

	// calc: rounded inch sizes against the law.
	it.each([
		[40, 2.9],
		[41, 0],
		[42, -0.5],
		[43, 1.9],
		[44, -2.2]
	])('the rounded table shifts the resistance of AWG %i by %f %%', (gauge, percent) => {
		const shift = ohmPerM(awgTableDiameterM(gauge)!) / ohmPerM(awgDiameterM(gauge)) - 1;
		expect(Math.abs(100 * shift - percent)).toBeLessThan(0.06);
	});

	it('that the table does not hold has no size by the table', () => {
		expect(awgTableDiameterM(39)).toBeNull();
		expect(awgTableDiameterM(42.5)).toBeNull();
	});
});

describe('resistance of wire', () => {
	// IEC 60028, copper 1/58 Ω·mm²/m; GNU units copperconductivity.
	it.each([
		[40, 3.4411449],
		[41, 4.3392036],
		[42, 5.4716347],
		[43, 6.8996039],
		[44, 8.7002399]
	])('of AWG %i is %f Ω/m at 20 °C', (gauge, ohm) => {
		expect(Math.abs(ohmPerM(awgDiameterM(gauge)) - ohm)).toBeLessThan(1e-7);
	});

	// GNU units; mathjs.
	it('of 1000 ft of 0.0025 in is 1659.3945 Ω', () => {
		expect(Math.abs(ohmPerM(inch(0.0025)) * 304.8 - 1659.3945)).toBeLessThan(1e-4);
	});

	// IEC 60028; 58.5 MS/m as winding-wire tables quote (IEC 60317-0-1, the clause from memory).
	it('of metric 0.063 mm is 5.5310 Ω/m at 58 and 5.4837 at 58.5 MS/m', () => {
		expect(Math.abs(ohmPerM(0.063e-3) - 5.531)).toBeLessThan(1e-4);
		expect(Math.abs(ohmPerM(0.063e-3, 20, 1 / windingWireConductivitySPerM) - 5.4837)).toBeLessThan(1e-4);
	});

	// Tolerance from memory (NEMA MW 1000), arithmetic calc.
	it('of AWG 42 goes +8.507 or −7.544 % with its bare tolerance', () => {
		const nominal = ohmPerM(inch(0.0025));
		expect(Math.abs(100 * (ohmPerM(inch(0.0024)) / nominal - 1) - 8.507)).toBeLessThan(0.001);
		expect(Math.abs(100 * (ohmPerM(inch(0.0026)) / nominal - 1) + 7.544)).toBeLessThan(0.001);
		expect(diameterToleranceM(inch(0.0025))).toBeCloseTo(inch(0.0001), 12);
		expect(diameterToleranceM(20e-6)).toBeCloseTo(1e-6, 12);
	});

	// α₂₀ = 0.00393 (IEC 60028 / ASTM B193).
	it('of 7500 Ω at 20 °C is 7205.25 at 10 and 7647.375 at 25 °C', () => {
		expect(Math.abs(atTemperature(7500, 10) - 7205.25)).toBeLessThan(1e-6);
		expect(Math.abs(atTemperature(7500, 25) - 7647.375)).toBeLessThan(1e-6);
	});

	// IEC 60028 / ASTM B193.
	it('of 7520 Ω at 27 °C is 7318.6636 at 20 °C', () => {
		expect(Math.abs(to20C(7520, 27) - 7318.6636)).toBeLessThan(1e-4);
	});

	it('of two metres of 28 AWG leads is nothing beside a pickup', () => {
		const { bobbin, packing } = genericBobbins[0]!;
		const predicted = predict({
			bobbin,
			packing,
			wire: { diameterM: awgDiameterM(42), overallDiameterM: 71e-6, ohmPerM: null },
			turns: [5000],
			connection: 'single',
			temperatureC: 20,
			effectivePermeability: null,
			load: null
		});
		if (!predicted.ok) throw new Error(predicted.field);
		const { value, uncertainty } = predicted.value.figures.resistanceOhm;
		expect(2 * leadOhmPerM).toBeLessThan(value / 1000);
		expect(2 * leadOhmPerM).toBeLessThan(uncertainty / 20);
	});
});

// 8.89 g/cm³ (IEC 60028); GNU units.
it.each([
	[40, 44.542113],
	[41, 35.323501],
	[42, 28.01281],
	[43, 22.215168],
	[44, 17.617429]
])('a metre of AWG %i has %f mg of copper', (gauge, mg) => {
	expect(Math.abs(copperKgPerM(awgDiameterM(gauge)) * 1e6 - mg)).toBeLessThan(1e-6);
});

describe('overall diameters', () => {
	const size = (key: string) => wireSizes.find((wire) => wire.key === key)!;

	// From memory.
	it('of AWG 42 are .0026 .0028 .0030 in single and .0028 .0030 .0032 in heavy', () => {
		const { single, heavy } = size('awg-42').enamel;
		expect([single!.minM, single!.nomM, single!.maxM]).toEqual([0.0026, 0.0028, 0.003].map(inch));
		expect([heavy!.minM, heavy!.nomM, heavy!.maxM]).toEqual([0.0028, 0.003, 0.0032].map(inch));
	});

	// A maker's catalogue citing NEMA MW 1000.
	it('of single AWG 40 are .0032 to .0037 in', () => {
		const { single } = size('awg-40').enamel;
		expect([single!.minM, single!.maxM]).toEqual([0.0032, 0.0037].map(inch));
	});

	// IEC 60317-0-1 table 1, as in a maker's table.
	it.each([
		['0.050', 0.055, 0.06, 0.06, 0.066],
		['0.056', 0.062, 0.067, 0.067, 0.074],
		['0.063', 0.069, 0.076, 0.075, 0.083],
		['0.071', 0.078, 0.084, 0.083, 0.091],
		['0.080', 0.087, 0.094, 0.094, 0.101]
	])('of %s mm are %f to %f mm in grade 1, %f to %f in grade 2', (mm, ...limits) => {
		const enamel = size(`mm-${mm}`).enamel;
		const { 'grade 1': one, 'grade 2': two } = enamel;
		const found = [one!.minM, one!.maxM, two!.minM, two!.maxM].map((metres) => metres * 1000);
		found.forEach((value, i) => expect(value).toBeCloseTo(limits[i]!, 9));
	});

	it('stand in order and beyond the bare wire in every size', () => {
		for (const wire of wireSizes) {
			for (const { minM, nomM, maxM } of Object.values(wire.enamel)) {
				expect(minM).toBeGreaterThan(wire.diameterM);
				expect(nomM).toBeGreaterThan(minM);
				expect(maxM).toBeGreaterThan(nomM);
			}
		}
	});

	it('come with every enamel, of which only polyurethane solders through', () => {
		const through = Object.values(enamelMaterials).filter((enamel) => enamel.solders);
		expect(through.map((enamel) => enamel.name)).toEqual(['polyurethane']);
	});
});

describe('tension', () => {
	// A wire maker's published tension chart.
	it.each([
		[40, 0.075],
		[41, 0.062],
		[42, 0.049],
		[43, 0.038],
		[44, 0.023]
	])('of AWG %i is at most %f lb', (gauge, pounds) => {
		expect(tensionN(awgDiameterM(gauge))!.maxN / 4.4482216152605).toBeCloseTo(pounds, 9);
	});

	// The same chart: AWG 42 = 22.2 gf = 0.218 N, 50 to 80 % of it.
	it('of AWG 42 is 22.2 gf, wound at half to four fifths of it', () => {
		const { maxN, fromN, toN } = tensionN(awgDiameterM(42))!;
		expect(maxN / 0.00980665).toBeCloseTo(22.2, 1);
		expect(maxN).toBeCloseTo(0.218, 3);
		expect([fromN / maxN, toN / maxN]).toEqual([0.5, 0.8]);
	});

	it('of a gauge by the rounded table, and of 0.050 mm, stays in the chart', () => {
		expect(tensionN(awgTableDiameterM(40)!)!.maxN).toBeCloseTo(tensionN(awgDiameterM(40.12))!.maxN, 3);
		expect(tensionN(0.05e-3)!.maxN).toBeCloseTo(tensionN(awgDiameterM(44))!.maxN, 9);
	});

	it('falls with every step to thinner wire and is not said where the chart ends', () => {
		let before = Infinity;
		for (let gauge = 40; gauge <= 44; gauge += 0.25) {
			const { maxN } = tensionN(awgDiameterM(gauge))!;
			expect(maxN).toBeLessThan(before);
			before = maxN;
		}
		expect(tensionN(awgDiameterM(39.4))).toBeNull();
		expect(tensionN(awgDiameterM(44.6))).toBeNull();
	});
});
