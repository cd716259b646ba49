import { describe, expect, it } from 'vitest';
import { calibrate } from '../coil/calibrate.ts';
import { predict, type Prediction } from '../coil/predict.ts';
import type { Result } from '../coil/refuse.ts';
import { usualUnits, type UnitPreference } from '../coil/units.ts';
import type { SpecContent } from './content.ts';
import { figureRows, roomMinM, roomOf, roomWords, togetherWords, type FigureRow } from './figures.ts';
import { predictSpec, specInput, specModel } from './model.ts';
import { startingSpec } from './start.ts';

const imperial: UnitPreference = {
	length: 'inch',
	wireDiameter: 'awg',
	temperature: 'fahrenheit',
	resistance: 'ohm',
	mass: 'ounce'
};

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}

const two = (a = 5000, b = 5000): SpecContent => {
	const content = startingSpec('two-coils', 'Evening bridge');
	content.coils[0]!.turns = a;
	content.coils[1]!.turns = b;
	return content;
};
const one = () => startingSpec('one-coil', 'Evening neck');

const rowsOf = (content: SpecContent, units = usualUnits, plain: Prediction | null = null) =>
	figureRows(content, value(predictSpec(content)), units, plain);
function find(rows: readonly FigureRow[], key: string): FigureRow {
	const row = rows.find((each) => each.key === key);
	if (!row) throw new Error(`There is no row ${key}.`);
	return row;
}

describe('the rows of a prediction', () => {
	it('each explain themselves in one sentence and have a key of their own', () => {
		for (const content of [two(), one(), startingSpec('wide-one-coil', 'Low'), startingSpec('other', 'Trial')]) {
			const rows = rowsOf(content);
			expect(new Set(rows.map((row) => row.key)).size).toBe(rows.length);
			for (const row of rows) {
				expect(row.value).not.toBe('');
				expect(row.value).not.toMatch(/NaN|undefined|Infinity|–$/);
				expect(row.explains).toMatch(/^[A-Z][^.]*(?:\d\.\d[^.]*)*\.$/);
			}
		}
	});

	it('show each figure to the digits its ± deserves', () => {
		// Twice the standard uncertainties, rounded by hand.
		const content = two();
		const { figures } = value(predictSpec(content));
		expect(2 * figures.resistanceOhm.uncertainty).toBeCloseTo(727.2, 0);
		expect(2 * figures.lengthM.uncertainty).toBeCloseTo(37.8, 0);
		const rows = rowsOf(content);
		expect(find(rows, 'resistance')).toMatchObject({ value: '7.5 kΩ', plusMinus: '± 0.7', remark: 'wire diameter' });
		expect(find(rows, 'length')).toMatchObject({ value: '1,365 m', plusMinus: '± 38' });
		expect(find(rows, 'mass')).toMatchObject({ value: '38.2 g', plusMinus: '± 3.7' });
		expect(find(rows, 'fill')).toMatchObject({ value: '50 %', plusMinus: '± 12' });
		expect(find(rows, 'size')).toMatchObject({ value: '67.0 × 16.2 mm', plusMinus: '± 2.3' });
	});

	it('follow the person’s units', () => {
		const rows = rowsOf(one(), imperial);
		expect(find(rows, 'resistance').value).toBe('5,700 Ω');
		expect(find(rows, 'length').value).toMatch(/ ft$/);
		expect(find(rows, 'mass').value).toMatch(/ oz$/);
		expect(find(rows, 'size').value).toMatch(/ in$/);
		expect(find(rows, 'tension').value).toMatch(/ lbf$/);
	});

	it('tell what makes a figure unsure by shares that add up to one', () => {
		for (const row of rowsOf(two()).filter(({ shares }) => shares.length > 0)) {
			expect(row.shares.reduce((sum, { share }) => sum + share, 0)).toBeCloseTo(1, 9);
			for (let i = 1; i < row.shares.length; i++)
				expect(row.shares[i - 1]!.share).toBeGreaterThanOrEqual(row.shares[i]!.share);
		}
	});

	it('say some hundred ohms in ohms', () => {
		const content = one();
		content.coils[0]!.turns = 500;
		expect(find(rowsOf(content), 'resistance').value).toMatch(/^\d{3} Ω$/);
	});

	it('show both coils where they differ, and tell the larger from the smaller', () => {
		const rows = rowsOf(two(4950, 5350));
		expect(find(rows, 'each').value).toMatch(/^3\.69 · 4\.03 kΩ$/);
		expect(find(rows, 'size').remark).toMatch(/^Slug coil; Screw coil \d/);
		expect(find(rows, 'room').label).toBe('Room to the flange, Slug coil');
		expect(find(rows, 'depth').label).toBe('Winding depth, Screw coil');
		expect(find(rowsOf(two()), 'each')).toMatchObject({ value: '3.73 kΩ', remark: 'alike' });
		expect(rowsOf(one()).some((row) => row.key === 'each')).toBe(false);
	});

	it('show the peak and its height as spans, or that there is none', () => {
		const rows = rowsOf(two());
		expect(find(rows, 'peak')).toMatchObject({ value: '2.2–3.1 kHz', plusMinus: null });
		expect(find(rows, 'peak').remark).toBe('500 kΩ volume, 500 kΩ tone, 500 pF cable');
		expect(find(rows, 'peak-height').value).toBe('+2 to +9 dB');
		const dull = two();
		dull.load.volumePotOhm = 5000;
		expect(find(rowsOf(dull), 'peak').value).toBe('none');
		expect(rowsOf(dull).some((row) => row.key === 'peak-height')).toBe(false);
	});

	it('say what tension the wire takes, and that no chart holds other sizes', () => {
		// AWG 42: 0.049 lbf at most, 22.2 gf (a wire maker's published tension chart).
		expect(find(rowsOf(two()), 'tension')).toMatchObject({ value: '22 gf', remark: 'wind with 11 gf to 18 gf' });
		const thick = one();
		thick.wire = { ...thick.wire, diameterM: 0.0002, overallDiameterM: 0.00023, overallMinM: null, overallMaxM: null };
		thick.coils[0]!.turns = 500;
		expect(find(rowsOf(thick), 'tension').value).toBe('no chart for this size');
	});

	it('reckon tension by the spool’s wire where there is one', () => {
		const content = two();
		const spool = { ...content.wire, diameterM: 0.000056406 };
		const rows = figureRows(content, value(predictSpec(content)), usualUnits, null, spool);
		// AWG 43: 0.038 lbf.
		expect(find(rows, 'tension').value).toBe('17 gf');
	});

	it('say that leads are nothing a meter shows, unless they are', () => {
		expect(find(rowsOf(two()), 'leads')).toMatchObject({ value: '0.13 Ω', remark: 'nothing a meter shows' });
		const long = two();
		long.leads.lengthM = 50;
		expect(find(rowsOf(long), 'leads').remark).toBe('0.3 % more');
		long.leads.lengthM = 0;
		expect(find(rowsOf(long), 'leads').value).toBe('none given');
	});

	it('say how two coils go together', () => {
		expect(find(rowsOf(two()), 'together').value).toBe('Hum-cancelling, in phase');
		const turned = two();
		turned.coils[1]!.pole = turned.coils[0]!.pole;
		expect(find(rowsOf(turned), 'together').value).toBe('Hum-cancelling, out of phase');
		expect(rowsOf(one()).some((row) => row.key === 'together')).toBe(false);
		expect(togetherWords({ humCancelling: false, inPhase: true })).toBe('not hum-cancelling, in phase');
	});

	it('show what kept coils change, and nothing where they change nothing', () => {
		const content = two(4950, 4850);
		const calibration = value(
			calibrate(specModel(content), [
				{ turns: [4950, 4850], connection: 'series', ohmAt20C: 7600, uncertaintyOhm: 30, meterOhm: 22 }
			])
		);
		const before = value(predictSpec(content));
		const rows = figureRows(content, value(predictSpec(content, { calibration })), usualUnits, before);
		expect(find(rows, 'resistance').value).toMatch(/^7\.\d\d kΩ$|^7\.6 kΩ$/);
		expect(find(rows, 'resistance').plain).toBe('Without your kept coils: 7.3 kΩ ± 0.7.');
		expect(find(rows, 'each').plain).toMatch(/^Without your kept coils: 3\.69 · 3\.61 kΩ ± \d\.\d+\.$/);
		expect(find(rows, 'length').plain).toBeNull();
		expect(find(figureRows(content, before, usualUnits, before), 'resistance').plain).toBeNull();
		expect(find(rows, 'resistance').shares.map(({ words }) => words)).toContain('readings of your kept coils');
	});
});

describe('what one more turn adds', () => {
	it('is what the next turn really adds, as sure as the computation of that turn is', () => {
		const content = one();
		const row = find(rowsOf(content), 'turn');
		const more = one();
		more.coils[0]!.turns += 1;
		const a = value(predictSpec(content)).figures.resistanceOhm.value;
		const b = value(predictSpec(more)).figures.resistanceOhm.value;
		expect(Number.parseFloat(row.value)).toBeCloseTo(b - a, 2);

		// Against propagation through the difference of a hundred turns around it.
		const input = specInput(content);
		const half = (name: 'diameterM' | 'overallDiameterM' | 'packing' | 'bobbinPart', turns: number, sign: number) => {
			const width = { diameterM: 0, overallDiameterM: 0, packing: 0, bobbinPart: 0, ...input.halfWidths };
			const u = (name === 'bobbinPart' ? 0.01 : width[name]) / Math.sqrt(3);
			const wire = { ...input.wire };
			let { packing } = input;
			const bobbin = { ...input.bobbin };
			if (name === 'diameterM') wire.diameterM += sign * u;
			if (name === 'overallDiameterM') wire.overallDiameterM += sign * u;
			if (name === 'packing') packing += sign * u;
			if (name === 'bobbinPart') {
				bobbin.straightM *= 1 + sign * u;
				bobbin.endDiameterM *= 1 + sign * u;
			}
			return value(predict({ ...input, wire, packing, bobbin, turns: [turns], load: null })).figures.resistanceOhm
				.value;
		};
		let square = 0;
		for (const name of ['diameterM', 'overallDiameterM', 'packing', 'bobbinPart'] as const) {
			const slope = (sign: number) => (half(name, 8050, sign) - half(name, 7950, sign)) / 100;
			square += ((slope(1) - slope(-1)) / 2) ** 2;
		}
		const shown = Number.parseFloat(row.plusMinus!.slice(2));
		expect(shown / (2 * Math.sqrt(square))).toBeGreaterThan(0.95);
		expect(shown / (2 * Math.sqrt(square))).toBeLessThan(1.15);
	});
});

describe('room to the flange', () => {
	const roomAt = (turns: number) => roomOf(value(predictSpec(two(4000, turns))), 1)!;

	it('is that of the coil asked for, with the uncertainty it would have by itself', () => {
		const alone = two(5200, 4000);
		const byItself = roomOf(value(predictSpec(alone)), 0)!;
		const room = roomAt(5200);
		expect(room.m).toBeCloseTo(byItself.m, 12);
		expect(room.uncertaintyM / byItself.uncertaintyM).toBeCloseTo(1, 6);
	});

	it('is a danger below half a millimetre and beyond the flange, with a sentence', () => {
		expect(roomWords({ m: roomMinM + 1e-9, uncertaintyM: 0 }, usualUnits).danger).toBe(false);
		expect(roomWords({ m: roomMinM - 1e-9, uncertaintyM: 0 }, usualUnits)).toMatchObject({
			danger: true,
			remark: 'too little for tape: the last turns may climb the flange'
		});
		expect(roomWords({ m: -0.0002, uncertaintyM: 0.0005 }, usualUnits)).toEqual({
			danger: true,
			remark: 'does not fit: 0.2 mm too much on each side. Wind fewer turns.'
		});
	});

	it('is said to be unsure where its ± is more than itself', () => {
		expect(roomWords({ m: 0.0007, uncertaintyM: 0.0005 }, usualUnits).remark).toMatch(/may turn out full/);
		expect(roomWords({ m: 0.0011, uncertaintyM: 0.0005 }, usualUnits).remark).not.toMatch(/full/);
	});

	it('is not known without a flange', () => {
		const content = two();
		content.bobbin.flangeOuterM = null;
		expect(roomOf(value(predictSpec(content)), 0)).toBeNull();
		expect(find(rowsOf(content), 'room').value).toBe('no flange given');
	});
});
