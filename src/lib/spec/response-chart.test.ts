import { describe, expect, it } from 'vitest';
import { eNotes, findPeak } from '../coil/response.ts';
import { dialsUp, predictSpec } from './model.ts';
import {
	chartFromHz,
	chartToHz,
	comparedMax,
	hertzText,
	inductanceText,
	isOff,
	levelAxisDb,
	levelText,
	lookAt,
	peakDbText,
	peakHzText,
	peakSpanHz,
	peakSpanText,
	sheetOf,
	type Compared,
	type LookAsked
} from './response-chart.ts';
import { startingSpec } from './start.ts';

const asked: LookAsked = { dials: dialsUp, cableLengthM: null, wire: null, calibration: null };
const bridge = { name: 'Evening bridge', content: startingSpec('two-coils', 'Evening bridge') };
const neck: Compared = {
	key: 'n',
	name: 'Evening neck',
	of: 'spec',
	content: startingSpec('one-coil', 'Evening neck')
};

function look(own = bridge, compared: readonly Compared[] = [], more: Partial<LookAsked> = {}) {
	const found = lookAt(own, compared, { ...asked, ...more });
	if (!found.ok) throw new Error(`${found.field} ${found.got}`);
	return found.value;
}

describe('the look at a spec', () => {
	it('has the peak of the prediction, 19 in 20', () => {
		const predicted = predictSpec(bridge.content);
		if (!predicted.ok) throw new Error(predicted.field);
		const { peakHz, peakDb } = predicted.value;
		expect(look().curves[0].peak).toEqual({
			hz: peakHz!.value,
			hzHalf: 2 * peakHz!.uncertainty,
			db: peakDb!.value,
			dbHalf: 2 * peakDb!.uncertainty
		});
	});

	it('runs from below the lowest string to the end of hearing, even by ear', () => {
		const { hertz, curves } = look();
		expect(hertz[0]).toBeCloseTo(chartFromHz, 9);
		expect(hertz.at(-1)).toBeCloseTo(chartToHz, 6);
		expect(curves[0].levelsDb).toHaveLength(hertz.length);
		const steps = hertz.slice(1).map((hz, i) => hz / hertz[i]!);
		expect(Math.max(...steps) - Math.min(...steps)).toBeLessThan(1e-9);
	});

	it('tells curves of one name apart, in the legend and in the sheet', () => {
		const same: Compared = { ...neck, key: 'm', name: bridge.name };
		const named = look(bridge, [same, { ...same, key: 'o' }, neck]);
		expect(named.curves.map(({ name }) => name)).toEqual([
			'Evening bridge',
			'Evening bridge (2)',
			'Evening bridge (3)',
			'Evening neck'
		]);
		expect(new Set(sheetOf(named).header).size).toBe(sheetOf(named).header.length);
	});

	it('has another spec into what this one plays into now, however often it was looked at before', () => {
		const at = (more: Partial<LookAsked>) => look(bridge, [neck], more).curves[1]!;
		const first = at({});
		expect(at({})).toEqual(first);
		expect(at({ cableLengthM: 6 }).peak!.hz).toBeLessThan(first.peak!.hz);
		expect(at({ dials: { volume: 5, tone: 10 } }).levelsDb[0]).toBeLessThan(first.levelsDb[0]!);
		expect(at({})).toEqual(first);
	});

	it('says inductance and the span of the peak with the digits their uncertainty leaves', () => {
		const [own] = look().curves;
		expect(inductanceText(own)).toMatch(/^\d\.\d H ± \d\.\d$/);
		expect(inductanceText({ inductanceH: 5.3312, inductanceHalfH: null })).toBe('5.33 H');
		expect(peakSpanText(own.peak!)).toMatch(/^\d\.\d–\d\.\d kHz$/);
		expect(peakSpanText({ ...own.peak!, hzHalf: null })).toBeNull();
	});

	it('lies in its band, and the band reaches its height at both edges of the span of the peak', () => {
		const { hertz, curves } = look();
		const [own] = curves;
		const { fromHz, toHz } = peakSpanHz(own.peak!)!;
		own.levelsDb.forEach((db, i) => {
			expect(own.band!.leastDb[i]).toBeLessThanOrEqual(db);
			expect(own.band!.greatestDb[i]).toBeGreaterThanOrEqual(db);
		});
		const top = hertz.filter((_, i) => own.band!.greatestDb[i]! > own.peak!.db - 1.5);
		// Within two points of the sweep and what the flat top of a peak adds.
		expect(top[0]! / fromHz).toBeLessThan(1.06);
		expect(top.at(-1)! / toHz).toBeGreaterThan(0.94);
	});

	it('has a narrower band when the inductance was measured', () => {
		const measured = structuredClone(bridge);
		measured.content.cores.measured = true;
		const width = (of: ReturnType<typeof look>) =>
			Math.max(...of.hertz.map((_, i) => of.curves[0].band!.greatestDb[i]! - of.curves[0].band!.leastDb[i]!));
		expect(width(look(measured))).toBeLessThan(0.6 * width(look()));
	});

	it('is surer of the peak when the self-capacitance was measured, and says that it was', () => {
		const measured = structuredClone(bridge);
		measured.content.load.coilF = look().curves[0].coilF;
		expect(look(measured).curves[0].coilMeasured).toBe(true);
		expect(look().curves[0].coilMeasured).toBe(false);
		expect(look(measured).curves[0].peak!.hz).toBeCloseTo(look().curves[0].peak!.hz, 6);
		expect(look(measured).curves[0].peak!.hzHalf).toBeLessThan(look().curves[0].peak!.hzHalf!);
	});

	it('gives the level at each E, as the circuit alone has it', () => {
		const { curves, hertz } = look();
		expect(curves[0].notesDb).toHaveLength(eNotes.length);
		eNotes.forEach(({ hz }, i) => {
			const after = hertz.findIndex((each) => each >= hz);
			const [low, high] = [curves[0].levelsDb[after - 1]!, curves[0].levelsDb[after]!].sort((a, b) => a - b);
			expect(curves[0].notesDb[i]).toBeGreaterThanOrEqual(low! - 0.02);
			expect(curves[0].notesDb[i]).toBeLessThanOrEqual(high! + 0.02);
		});
	});

	it('rings lower into a longer cable, and takes the spec its own where none is given', () => {
		const long = look(bridge, [], { cableLengthM: 10 });
		expect(long.curves[0].peak!.hz).toBeLessThan(look().curves[0].peak!.hz);
		expect(long.cableF).toBeCloseTo(10 * bridge.content.load.cableFPerM, 18);
		expect(look().cableLengthM).toBe(bridge.content.load.cableLengthM);
	});

	it('is brighter when wound looser, where the self-capacitance goes by the packing', () => {
		const loose = structuredClone(bridge);
		loose.content.packing.value = 0.7;
		// The inductance changes as well: into the same one, the coil's own capacitance alone is looked at.
		const { circuit, coilF } = look(loose).curves[0];
		expect(coilF).toBeLessThan(look().curves[0].coilF);
		expect(findPeak({ ...look().curves[0].circuit, coilF: circuit.coilF })!.hz).toBeGreaterThan(
			look().curves[0].peak!.hz
		);
	});

	it('has no peak with the volume turned down, a band all the same, and nothing at all at 0', () => {
		const half = look(bridge, [], { dials: { volume: 7, tone: 10 } });
		expect(half.curves[0].peak).toBeNull();
		expect(half.curves[0].band).not.toBeNull();
		expect(isOff(half.curves[0])).toBe(false);
		const off = look(bridge, [], { dials: { volume: 0, tone: 10 } });
		expect(isOff(off.curves[0])).toBe(true);
		expect(off.curves[0].levelsDb.every(Number.isFinite)).toBe(true);
	});

	it('that makes no sense is refused by its field', () => {
		const wrong = structuredClone(bridge);
		wrong.content.bobbin.traverseM = 0;
		expect(lookAt(wrong, [], asked)).toMatchObject({ ok: false, field: 'bobbin.traverseM' });
	});
});

describe('what it is compared with', () => {
	it('plays into the same controls, cable and input, with its own cover and capacitance', () => {
		const other = structuredClone(neck) as Extract<Compared, { of: 'spec' }>;
		other.content.load = { ...other.content.load, volumePotOhm: 250e3, cableLengthM: 1, lossOhm: 250e3, coilF: 70e-12 };
		const { curves } = look(bridge, [other], { cableLengthM: 3 });
		expect(curves[1]!.circuit).toMatchObject({ volumePotOhm: 500e3, cableF: 3e-10, lossOhm: 250e3, coilF: 70e-12 });
		expect(curves[1]!.band).toBeNull();
		expect(curves[1]!.peak!.hzHalf).toBeGreaterThan(0);
	});

	it('may be a measured coil; where nobody measured its capacitance it has this one', () => {
		const coil = { name: 'TQ-7', of: 'measured', resistanceOhm: 7400, inductanceH: 2.5 } as const;
		const { curves } = look(bridge, [
			{ ...coil, key: 'a', coilF: 110e-12 },
			{ ...coil, key: 'b', coilF: null }
		]);
		expect(curves[1]!.coilMeasured).toBe(true);
		expect(curves[1]!.peak!.hzHalf).toBeNull();
		expect(curves[2]!.coilMeasured).toBe(false);
		expect(curves[2]!.coilF).toBe(curves[0].coilF);
		// 2.5 H with 610 pF ring at 4075.540 Hz by 1/(2π√(LC)), reckoned apart; the resistances bring it down a little.
		expect(curves[1]!.peak!.hz).toBeLessThan(4075.54);
		expect(curves[1]!.peak!.hz).toBeGreaterThan(3800);
	});

	it('is left out by name where it makes no sense, and the rest still stands', () => {
		const wrong = {
			key: 'w',
			name: 'Odd one',
			of: 'measured',
			resistanceOhm: 7400,
			inductanceH: 0,
			coilF: null
		} as const;
		const { curves, leftOut } = look(bridge, [wrong, neck]);
		expect(curves.map(({ key }) => key)).toEqual(['this', 'n']);
		expect(leftOut).toMatchObject([{ key: 'w', name: 'Odd one', refused: { field: 'inductanceH' } }]);
	});

	it('is at most three', () => {
		const many = Array.from({ length: comparedMax + 2 }, (_, i) => ({ ...neck, key: `n${i}` }));
		expect(look(bridge, many).curves).toHaveLength(1 + comparedMax);
	});
});

describe('the axis of levels', () => {
	it('holds every curve from its top to where it fades, in whole tens', () => {
		const plain = levelAxisDb(look());
		expect(plain.max % 5).toBe(0);
		expect(plain.max).toBeGreaterThan(Math.max(...look().curves[0].band!.greatestDb));
		expect(plain.min).toBe(-40);
		expect(levelAxisDb(look(bridge, [], { dials: { volume: 1, tone: 10 } })).min).toBe(-60);
		expect(levelAxisDb(look(bridge, [], { dials: { volume: 0, tone: 10 } })).min).toBe(-40);
	});
});

describe('the sheet', () => {
	const found = look(bridge, [neck]);
	const { header, rows } = sheetOf(found);

	it('has a column of one unit for each figure, named in its heading', () => {
		expect(header).toEqual([
			'What',
			'Frequency (Hz)',
			'Frequency 19 in 20 ± (Hz)',
			'Peak height 19 in 20 ± (dB)',
			"Evening bridge (dB over the strings' voltage)",
			"Evening neck (dB over the strings' voltage)",
			'Evening bridge, least 19 in 20 (dB)',
			'Evening bridge, greatest 19 in 20 (dB)'
		]);
		for (const row of rows) expect(row).toHaveLength(header.length);
	});

	it('holds each peak, each E and the whole sweep', () => {
		expect(rows.map(([what]) => what)).toEqual([
			'Peak of Evening bridge',
			'Peak of Evening neck',
			...eNotes.map(({ name }) => name),
			...found.hertz.map(() => 'Curve')
		]);
		expect(rows[0]![1]).toBeCloseTo(found.curves[0].peak!.hz, 1);
		expect(rows[0]![4]).toBeCloseTo(found.curves[0].peak!.db, 4);
		// E4 by equal temperament, A4 = 440 Hz (ISO 16): 440·2^(−5/12).
		expect(rows[4]!.slice(0, 2)).toEqual(['E4', 329.628]);
	});

	it('leaves out the peak of a curve that only falls', () => {
		const down = sheetOf(look(bridge, [], { dials: { volume: 6, tone: 10 } }));
		expect(down.rows[0]![0]).toBe('E2');
	});
});

describe('figures in words', () => {
	it.each([
		[82.41, '82.4 Hz'],
		[659.26, '659 Hz'],
		[999.7, '1.00 kHz'],
		[2637.02, '2.64 kHz'],
		[9997, '10.0 kHz'],
		[15_823, '15.8 kHz']
	])('%d Hz is written %s', (hz, text) => {
		expect(hertzText(hz)).toBe(text);
	});

	it('a peak has the digits its uncertainty leaves it, and three where none is known', () => {
		const peak = { hz: 2637, hzHalf: 520, db: 5.06, dbHalf: 4.6 };
		expect(peakHzText(peak)).toBe('2.6 kHz ± 0.5');
		expect(peakHzText({ ...peak, hzHalf: 120 })).toBe('2.64 kHz ± 0.12');
		expect(peakHzText({ ...peak, hz: 812, hzHalf: 41 })).toBe('810 Hz ± 40');
		expect(peakHzText({ ...peak, hzHalf: null })).toBe('2.64 kHz');
		expect(peakDbText(peak)).toBe('+5 dB ± 5');
		expect(peakDbText({ ...peak, db: -0.04, dbHalf: null })).toBe('0.0 dB');
		expect(levelText(-21.44)).toBe('−21.4 dB');
	});
});
