import { describe, expect, it } from 'vitest';
import { awgDiameterM, awgOfDiameter, copperKgPerM, metresPerInch, ohmPerM } from '../../src/lib/coil/wire.ts';
import { inUnits } from './program.ts';

const same = (ours: number, theirs: number, relative: number) =>
	expect(Math.abs(ours / theirs - 1)).toBeLessThan(relative);

describe('wire by GNU units', () => {
	it.each([36, 38, 40, 41, 42, 43, 44, 46])('AWG %i has the diameter, resistance and mass of ours', (gauge) => {
		same(awgDiameterM(gauge), inUnits(`wiregauge(${gauge})`, 'm'), 1e-9);
		const area = `(pi * wiregauge(${gauge})^2 / 4)`;
		same(ohmPerM(awgDiameterM(gauge)), inUnits(`1 / (copperconductivity * ${area})`, 'ohm/m'), 1e-9);
		same(copperKgPerM(awgDiameterM(gauge)), inUnits(`8.89 (g/cm^3) * ${area}`, 'kg/m'), 1e-9);
	});

	it('0.0025 in and 0.063 mm are the same gauges as ours', () => {
		for (const size of ['0.0025 in', '0.063 mm']) {
			const theirs = inUnits(size, 'wiregauge');
			same(awgOfDiameter(inUnits(size, 'm')), theirs, 1e-9);
		}
		expect(inUnits('1 in', 'm')).toBe(metresPerInch);
	});
});
