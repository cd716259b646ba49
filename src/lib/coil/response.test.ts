import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import type { Result } from './refuse.ts';
import {
	coilCapacitanceF,
	eNotes,
	findPeak,
	fromTwoCapacitors,
	noteHz,
	peakOf,
	resonanceHz,
	responseDb,
	sweepHz,
	trackAt,
	usualLoad,
	type Circuit
} from './response.ts';

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}

/** 2.5 H, 7.5 kΩ, 610 pF in all, 500 kΩ: the circuit of the reference figures, whose input draws nothing. */
const reference: Circuit = {
	inductanceH: 2.5,
	resistanceOhm: 7500,
	coilF: 110e-12,
	lossOhm: null,
	volumePotOhm: 500e3,
	volume: 1,
	tonePotOhm: null,
	toneCapF: 0,
	tone: 1,
	cableF: 500e-12,
	inputOhm: 1e12
};
const db = (circuit: Circuit, hz: number) => value(responseDb(circuit, [hz]))[0]!;

describe('resonance of an inductance and a capacitance alone', () => {
	// calc.
	it.each([
		[110e-12, 9597.404],
		[610e-12, 4075.54],
		[1110e-12, 3021.264]
	])('2.5 H with %f F rings at %f Hz', (farad, hz) => {
		expect(Math.abs(resonanceHz(2.5, farad) - hz)).toBeLessThan(0.001);
	});
});

describe('the response', () => {
	// ngspice, 1e-5 dB.
	it('of 2.5 H, 7.5 kΩ, 610 pF, 500 kΩ peaks at 4044.737 Hz, 12.21005 dB up', () => {
		const peak = value(peakOf(reference))!;
		expect(Math.abs(peak.hz - 4044.737)).toBeLessThan(0.001);
		expect(Math.abs(peak.db - 12.21005)).toBeLessThan(1e-5);
		expect(Math.abs(db(reference, 1000) - 0.384585)).toBeLessThan(1e-5);
		expect(Math.abs(db(reference, 100) + 0.12432)).toBeLessThan(1e-5);
	});

	// ngspice.
	it.each([
		[250e3, 3993.927, 8.58153],
		[1e6, 4057.34, 14.84124]
	])('with a pot of %f Ω peaks at %f Hz, %f dB up', (volumePotOhm, hz, up) => {
		const peak = value(peakOf({ ...reference, volumePotOhm }))!;
		expect(Math.abs(peak.hz - hz)).toBeLessThan(0.001);
		expect(Math.abs(peak.db - up)).toBeLessThan(1e-5);
	});

	// ngspice.
	it('with 400 kΩ of loss across the inductance peaks at 3905.255 Hz, 8.08947 dB up', () => {
		const peak = value(peakOf({ ...reference, lossOhm: 400e3 }))!;
		expect(Math.abs(peak.hz - 3905.255)).toBeLessThan(0.001);
		expect(Math.abs(peak.db - 8.08947)).toBeLessThan(1e-5);
	});

	// ngspice: a divider, 250 k + 250 k, with the cable on the wiper, and the same loss.
	it('with the pot at half falls without a peak', () => {
		const half = { ...reference, lossOhm: 400e3, volume: 0.5 };
		expect(Math.abs(db(half, 100) + 6.15501)).toBeLessThan(1e-5);
		expect(Math.abs(db(half, 1000) + 6.62591)).toBeLessThan(1e-5);
		expect(Math.abs(db(half, 5000) + 11.38631)).toBeLessThan(1e-5);
		expect(value(peakOf(half))).toBeNull();
	});

	it('with everything up is that of the closed form, and peaks only above a Q of 0.7071', () => {
		fc.assert(
			fc.property(
				fc.double({ min: 0.5, max: 10, noNaN: true }),
				fc.double({ min: 1000, max: 20_000, noNaN: true }),
				fc.double({ min: 100e-12, max: 2e-9, noNaN: true }),
				fc.double({ min: 20e3, max: 1e6, noNaN: true }),
				(inductanceH, resistanceOhm, cableF, potOhm) => {
					const circuit = { ...reference, inductanceH, resistanceOhm, coilF: 0, cableF, volumePotOhm: potOhm };
					// H = 1/(LCs² + (RC + L/P)s + 1 + R/P)
					const parallel = 1 / (1 / potOhm + 1 / circuit.inputOhm);
					const a = inductanceH * cableF;
					const b = resistanceOhm * cableF + inductanceH / parallel;
					const c = 1 + resistanceOhm / parallel;
					const w = 2 * Math.PI * 3000;
					expect(db(circuit, 3000)).toBeCloseTo(-20 * Math.log10(Math.hypot(c - a * w * w, b * w)), 8);
					const q = Math.sqrt(a * c) / b;
					const peak = value(peakOf(circuit));
					// Right at the edge the peak is flatter than can be told.
					if (q > 0.75) {
						expect(peak!.hz / (Math.sqrt(c / a - (b * b) / (2 * a * a)) / (2 * Math.PI))).toBeCloseTo(1, 5);
					} else if (q < Math.SQRT1_2) expect(peak).toBeNull();
				}
			)
		);
	});

	it('with the tone control down rings low, with the capacitor in place of the cable', () => {
		const down = { ...reference, tonePotOhm: 500e3, toneCapF: 22e-9, tone: 0 };
		const peak = value(peakOf(down))!;
		expect(peak.hz / resonanceHz(2.5, 22.61e-9)).toBeGreaterThan(0.85);
		expect(peak.hz).toBeLessThan(resonanceHz(2.5, 22.61e-9));
	});

	it('with a tone control that is up is a little lower than without one', () => {
		const up = { ...reference, tonePotOhm: 500e3, toneCapF: 22e-9, tone: 1 };
		expect(value(peakOf(up))!.db).toBeLessThan(value(peakOf(reference))!.db);
		expect(value(peakOf(up))!.db).toBeGreaterThan(value(peakOf(reference))!.db - 6);
	});

	it('of a coil turned off is silence, at 0 Hz too, and never −∞', () => {
		expect(value(responseDb({ ...reference, volume: 0 }, [0, 1000]))).toEqual([-200, -200]);
		const still = { ...reference, lossOhm: 400e3, tonePotOhm: 500e3, toneCapF: 22e-9, tone: 0 };
		expect(db(still, 0)).toBeCloseTo(20 * Math.log10(500 / 507.5), 4);
	});

	it('names the frequency that makes no sense', () => {
		expect(responseDb(reference, [100, NaN])).toMatchObject({ ok: false, field: 'hertz[1]', got: null });
		expect(peakOf({ ...reference, volume: 1.1 })).toMatchObject({ ok: false, field: 'load.volume', max: 1 });
	});

	it('is brighter for looser winding, which has less capacitance', () => {
		const peak = (packing: number) => findPeak({ ...reference, coilF: coilCapacitanceF(packing) })!.hz;
		expect(coilCapacitanceF(0.7)).toBeLessThan(coilCapacitanceF(0.9));
		expect(peak(0.7)).toBeGreaterThan(peak(0.9));
		// What windings are packed to, against 60 to 200 pF (from memory).
		expect(coilCapacitanceF(0.6)).toBeGreaterThan(60e-12);
		expect(coilCapacitanceF(1.07)).toBeLessThan(200e-12);
	});

	it('is swept evenly by ear, to both ends', () => {
		const hertz = value(sweepHz(20, 20_000, 4));
		hertz.forEach((hz, i) => expect(hz).toBeCloseTo(20 * 10 ** i, 6));
	});
});

describe('two added capacitors', () => {
	const first = { addedF: 470e-12, hz: 4179.6136 };
	const second = { addedF: 2200e-12, hz: 2094.3253 };

	// calc, L = (1/f2² − 1/f1²)/(4π²(C2 − C1)).
	it('tell 2.5 H and 110 pF, in either order', () => {
		for (const told of [fromTwoCapacitors(first, second), fromTwoCapacitors(second, first)]) {
			expect(value(told).inductanceH).toBeCloseTo(2.5, 6);
			expect(value(told).coilF * 1e12).toBeCloseTo(110, 3);
		}
	});

	it('tell the coil they were measured on', () => {
		fc.assert(
			fc.property(
				fc.double({ min: 0.5, max: 20, noNaN: true }),
				fc.double({ min: 30e-12, max: 300e-12, noNaN: true }),
				(inductanceH, coilF) => {
					const ring = (addedF: number) => ({ addedF, hz: resonanceHz(inductanceH, coilF + addedF) });
					const told = value(fromTwoCapacitors(ring(470e-12), ring(2.2e-9)));
					expect(told.inductanceH / inductanceH).toBeCloseTo(1, 9);
					expect(told.coilF / coilF).toBeCloseTo(1, 6);
				}
			)
		);
	});

	it('of which the larger rings no lower are refused', () => {
		expect(fromTwoCapacitors(first, { ...second, hz: 5000 })).toMatchObject({ ok: false, field: 'small.hz' });
		expect(fromTwoCapacitors(first, { ...first })).toMatchObject({ ok: false, field: 'large.addedF' });
	});
});

describe('a pot', () => {
	it.each([
		[0, 0, 0],
		[5, 0.5, 0.12],
		[10, 1, 1],
		[12, 1, 1]
	])('at %f has %f of its track below when linear, %f when audio', (dial, linear, audio) => {
		expect(trackAt(dial, 'linear')).toBeCloseTo(linear, 12);
		expect(trackAt(dial, 'audio')).toBeCloseTo(audio, 12);
	});
});

// ISO 16: A4 = 440 Hz; equal temperament.
it('notes stand where equal temperament puts them', () => {
	expect(noteHz(69)).toBe(440);
	expect(noteHz(64)).toBeCloseTo(329.6276, 4);
	expect(eNotes.find((note) => note.name === 'E2')!.hz).toBeCloseTo(82.4069, 4);
	expect(eNotes.find((note) => note.name === 'E4')!.hz).toBeCloseTo(329.6276, 4);
});

it('the usual load is two 500 kΩ pots, 22 nF, 1 MΩ and about 500 pF', () => {
	expect(usualLoad).toMatchObject({ volumePotOhm: 500e3, tonePotOhm: 500e3, toneCapF: 22e-9, inputOhm: 1e6 });
	expect(value(peakOf({ ...usualLoad, inductanceH: 4.5, resistanceOhm: 7500 }))!.hz).toBeGreaterThan(2000);
});
