import { describe, expect, it } from 'vitest';
import type { SpecContent } from './content.ts';
import {
	apartFromRestMax,
	calibrationOf,
	figuresApartMax,
	packingHalfWidthMin,
	resistanceSay,
	resistanceSays,
	type KeptReading
} from './kept.ts';
import { predictCoil, predictSpec } from './model.ts';
import { startingSpec } from './start.ts';

/** Figures that can be followed by hand: a round core of 10 mm around, wire of 0.1 mm on squares, a metre to the ohm. */
const content: SpecContent = (() => {
	const base = startingSpec('other', 'Round');
	return {
		...base,
		bobbin: {
			...base.bobbin,
			name: 'Round',
			straightM: 0,
			endDiameterM: 0.01 / Math.PI,
			traverseM: 0.01,
			flangeOuterM: null
		},
		wire: {
			...base.wire,
			diameterM: 0.00009,
			overallDiameterM: 0.0001,
			overallMinM: null,
			overallMaxM: null,
			ohmPerM: 1
		},
		packing: { key: 'layered', value: 1, halfWidth: 0.06, measured: false }
	};
})();
const { endDiameterM, traverseM } = content.bobbin;

/** 1000 turns grow by 0.1² / (1 · 10) mm each, one millimetre in all: 1000 · 10 mm + π · 1 µm · 1000² = 13.14159 m. */
const modelledOhm = 10 + Math.PI;

let made = 0;
const coil = (more: Partial<KeptReading> = {}): KeptReading => ({
	runId: `run-${(made += 1)}`,
	sticker: `C${made}`,
	name: 'Round · Coil',
	turns: 1000,
	endedAt: '2026-03-02T10:00:00.000Z',
	specRevisionNo: 1,
	bobbin: { name: 'Round', straightM: 0, endDiameterM, traverseM },
	ohmAt20C: modelledOhm,
	open: false,
	uncertaintyOhm: 0.01,
	meterOhm: 0,
	outerWidthM: null,
	outerWidthHalfWidthM: 0,
	inductanceH: null,
	...more
});
const said = (kept: KeptReading[], of = content) => calibrationOf(of, null, kept);

describe('what kept coils say of resistance', () => {
	it('is nothing while there are none', () => {
		expect(said([])).toEqual({ calibration: null, used: [], leftOut: [], packing: null, permeability: null });
	});

	it('is the ratio of measured to modelled, each coil with its share', () => {
		const kept = [coil({ ohmAt20C: 1.02 * modelledOhm }), coil({ ohmAt20C: 1.04 * modelledOhm })];
		const { used, calibration } = said(kept);
		expect(used.map(({ ratio }) => ratio)).toEqual([expect.closeTo(1.02, 9), expect.closeTo(1.04, 9)]);
		// Read alike, they count alike but for the reading's own part, which is relative: nearly one half each.
		expect(used[0]!.share).toBeCloseTo(0.5, 3);
		expect(used[0]!.share + used[1]!.share).toBeCloseTo(1, 12);
		expect(used[0]).toMatchObject({ runId: kept[0]!.runId, sticker: kept[0]!.sticker, turns: 1000 });
		expect(calibration?.kept).toHaveLength(2);
	});

	it('gives a coil read poorly less of a say', () => {
		const { used } = said([coil({ uncertaintyOhm: 0.01 }), coil({ uncertaintyOhm: 0.5 })]);
		expect(used[0]!.share).toBeGreaterThan(0.9);
	});

	it('moves the prediction to them and narrows it', () => {
		const before = predictCoil(content, 1000);
		const calibration = said([1, 2, 3, 4].map(() => coil({ ohmAt20C: 1.02 * modelledOhm }))).calibration;
		const after = predictCoil(content, 1000, { calibration });
		if (!before.ok || !after.ok || !calibration) throw new Error('refused');
		const [plain, taught] = [before.value.figures.resistanceOhm, after.value.figures.resistanceOhm];
		expect(plain.value).toBeCloseTo(modelledOhm, 9);
		expect(taught.value / modelledOhm).toBeCloseTo(calibration.scale, 9);
		expect(calibration.scale).toBeGreaterThan(1.015);
		expect(calibration.scale).toBeLessThan(1.02);
		expect(taught.uncertainty).toBeLessThan(plain.uncertainty);
	});

	it('is reckoned with the wire of the spool', () => {
		const wire = { ...content.wire, ohmPerM: 1.1 };
		const { used } = calibrationOf(content, wire, [coil({ ohmAt20C: 1.1 * modelledOhm })]);
		expect(used[0]!.ratio).toBeCloseTo(1, 9);
	});

	it('of one of two coils serves the pickup of both', () => {
		const two = startingSpec('two-coils', 'Evening bridge');
		const one = predictCoil(two, 5000);
		if (!one.ok) throw new Error(one.field);
		const { bobbin } = two;
		const kept = coil({
			bobbin,
			turns: 5000,
			ohmAt20C: 1.03 * one.value.figures.resistanceOhm.value,
			uncertaintyOhm: 5
		});
		const { calibration } = calibrationOf(two, null, [kept]);
		const plain = predictSpec(two);
		const taught = predictSpec(two, { calibration });
		if (!plain.ok || !taught.ok) throw new Error('refused');
		const ratio = taught.value.figures.resistanceOhm.value / plain.value.figures.resistanceOhm.value;
		expect(ratio).toBeCloseTo(calibration!.scale, 9);
		expect(calibration!.scale).toBeGreaterThan(1.02);
	});
});

describe('a coil that teaches nothing is named with the reason', () => {
	const why = (more: Partial<KeptReading>, of = content) => {
		const { leftOut, used } = said([coil(more), coil()], of);
		return [leftOut.map((one) => one.why), used.length];
	};

	it.each<[string, Partial<KeptReading>, string]>([
		['not measured', { ohmAt20C: null }, 'no-resistance'],
		['beyond the meter', { ohmAt20C: null, open: true }, 'open-or-short'],
		['hundreds of times what it should be', { ohmAt20C: 500 * modelledOhm }, 'open-or-short'],
		['next to nothing', { ohmAt20C: 0.01 * modelledOhm }, 'open-or-short'],
		['half as much again', { ohmAt20C: 1.5 * modelledOhm }, 'too-far'],
		['half of it', { ohmAt20C: 0.5 * modelledOhm }, 'too-far'],
		['read to a quarter', { uncertaintyOhm: 0.25 * modelledOhm }, 'too-unsure'],
		['with more turns than any winding holds', { turns: 1e6 }, 'too-far'],
		[
			'on another bobbin of the name',
			{ bobbin: { name: 'Round', straightM: 0, endDiameterM: 1.2 * endDiameterM, traverseM } },
			'other-figures'
		],
		[
			'on a straight bobbin of the name',
			{ bobbin: { name: 'Round', straightM: 0.001, endDiameterM, traverseM } },
			'other-figures'
		]
	])('%s', (_, more, reason) => {
		expect(why(more)).toEqual([[reason], 1]);
	});

	it('but not for a core that was measured a little otherwise', () => {
		const near = 1 + 0.9 * figuresApartMax;
		expect(why({ bobbin: { name: 'Round', straightM: 0, endDiameterM: near * endDiameterM, traverseM } })).toEqual([
			[],
			2
		]);
	});

	it('all of them where the spec itself makes no sense', () => {
		const odd = { ...content, wire: { ...content.wire, overallDiameterM: 0.00005 } };
		const { leftOut, calibration } = said([coil(), coil()], odd);
		expect(leftOut.map((one) => one.why)).toEqual(['spec-refused', 'spec-refused']);
		expect(calibration).toBeNull();
	});
});

it('what the others say to one of them is what they say without it', () => {
	const kept = [1, 1.004, 0.8, 0.996, 1.06, 2].map((ratio) => coil({ ohmAt20C: ratio * modelledOhm }));
	const says = resistanceSays(content, null, kept);
	expect(says(null)).toEqual(resistanceSay(content, null, kept));
	expect(says(null).leftOut).toHaveLength(3);
	for (const { runId } of kept) {
		expect(says(runId)).toEqual(
			resistanceSay(
				content,
				null,
				kept.filter((other) => other.runId !== runId)
			)
		);
	}
});

describe('a coil that reads far from the rest', () => {
	/** Runs at these parts of what the model says, and which of them are left out. */
	const far = (...ratios: number[]) => {
		const kept = ratios.map((ratio) => coil({ ohmAt20C: ratio * modelledOhm, uncertaintyOhm: 0 }));
		const { leftOut, used, calibration } = said(kept);
		expect(leftOut.every(({ why }) => why === 'far-from-rest')).toBe(true);
		expect(used.length + leftOut.length).toBe(ratios.length);
		return { out: leftOut.map(({ runId }) => ratios[kept.findIndex((one) => one.runId === runId)]!), calibration };
	};

	it('with a fifth of its turns shorted teaches the others nothing', () => {
		const { out, calibration } = far(1, 1.004, 0.8, 0.996);
		expect(out).toEqual([0.8]);
		expect(calibration).toEqual(far(1, 1.004, 0.996).calibration);
	});

	it('is measured from the middle one, wherever the model lies', () => {
		// The middle of the five is 1.2; 5 % either way are 1.14 to 1.26.
		expect(far(1.2, 1.145, 1.255, 1.13, 1.2).out).toEqual([1.13]);
		expect(far(1.2, 1.145, 1.255, 1.27, 1.2).out).toEqual([1.27]);
		// Of four it is half way between the middle two, 1.2.
		expect(far(1.19, 1.21, 1.2, 1.3).out).toEqual([1.3]);
	});

	it('is one of three at least', () => {
		expect(far(1, 0.8).out).toEqual([]);
		expect(far(1, 1, 0.8).out).toEqual([0.8]);
	});

	it('is not told where half of them disagree: then the band widens', () => {
		const { out, calibration } = far(1, 1, 0.8, 0.8);
		expect(out).toEqual([]);
		expect(calibration!.scatter).toBeGreaterThan(0.05);
		expect(far(1, 0.9, 0.8).out).toEqual([]);
	});

	it('is not one whose reading may be off by as much', () => {
		const off = 1 + apartFromRestMax + 0.03;
		const kept = (uncertaintyOhm: number) => [coil(), coil(), coil({ ohmAt20C: off * modelledOhm, uncertaintyOhm })];
		expect(said(kept(0.01 * off * modelledOhm)).leftOut).toHaveLength(1);
		// 2 · 0.02 are more than the 0.03 beyond.
		expect(said(kept(0.02 * off * modelledOhm)).leftOut).toEqual([]);
	});

	it('has no say in packing and cores either', () => {
		const measured = { outerWidthM: endDiameterM + 0.002 / 0.8 };
		const wrong = coil({ ...measured, outerWidthM: endDiameterM + 0.002 / 0.9, ohmAt20C: 0.8 * modelledOhm });
		const { packing, leftOut } = said([coil(measured), coil(measured), wrong]);
		expect(leftOut).toHaveLength(1);
		expect(packing).toMatchObject({ value: expect.closeTo(0.8, 9), coils: 2 });
	});

	it('leaves honest scatter of one in a hundred alone', () => {
		expect(far(0.98, 0.99, 1, 1.01, 1.02, 1, 0.97, 1.03).out).toEqual([]);
	});
});

describe('what widths say of packing', () => {
	// Depth at packing k is 1 mm / k, on both sides of the core.
	const widthAt = (packing: number) => endDiameterM + 0.002 / packing;

	it('is the packing that explains them, one by one and in the mean', () => {
		const { packing } = said([coil({ outerWidthM: widthAt(0.8) }), coil({ outerWidthM: widthAt(0.9) }), coil()]);
		expect(packing?.value).toBeCloseTo(0.85, 9);
		expect(packing?.coils).toBe(2);
		// Standard deviation 0.1/√2, as wide as a rectangle of √3 times that.
		expect(packing?.halfWidth).toBeCloseTo((Math.sqrt(3) * 0.1) / Math.SQRT2, 9);
	});

	it('is never surer than one hand repeats itself', () => {
		const { packing } = said([coil({ outerWidthM: widthAt(0.8) }), coil({ outerWidthM: widthAt(0.8) })]);
		expect(packing?.halfWidth).toBe(packingHalfWidthMin);
	});

	it('is as unsure as the caliper, however many were measured', () => {
		const measured = { outerWidthM: widthAt(1), outerWidthHalfWidthM: 0.0001 };
		// 0.1 mm of width is 0.05 mm of one millimetre's depth: 5 % of the packing.
		expect(said([coil(measured)]).packing?.halfWidth).toBeCloseTo(0.05, 9);
		expect(said([coil(measured), coil(measured), coil(measured)]).packing?.halfWidth).toBeCloseTo(0.05, 9);
	});

	it('takes no width that no packing explains, nor one of another bobbin', () => {
		expect(said([coil({ outerWidthM: widthAt(0.1) }), coil({ outerWidthM: endDiameterM })]).packing).toBeNull();
		const other = { name: 'Round', straightM: 0.02, endDiameterM, traverseM };
		expect(said([coil({ outerWidthM: widthAt(0.8), bobbin: other })]).packing).toBeNull();
	});

	it('counts a coil whose resistance nobody read', () => {
		expect(said([coil({ outerWidthM: widthAt(0.8), ohmAt20C: null })]).packing?.coils).toBe(1);
	});
});

describe('what inductances say of the cores', () => {
	const airH = (() => {
		const one = predictCoil(content, 1000);
		if (!one.ok) throw new Error(one.field);
		return one.value.figures.airInductanceH.value;
	})();
	const cored = { ...content, cores: { key: 'slugs-screws', effectivePermeability: 2.4, measured: false } };

	it('is measured over that without iron, in the mean', () => {
		const { permeability } = said([coil({ inductanceH: 2 * airH }), coil({ inductanceH: 2.2 * airH })], cored);
		expect(permeability?.value).toBeCloseTo(2.1, 6);
		expect(permeability?.coils).toBe(2);
	});

	it('leaves out a coil that was measured before its iron was in', () => {
		expect(said([coil({ inductanceH: 1.02 * airH })], cored).permeability).toBeNull();
		const air = { ...content, cores: { key: 'air', effectivePermeability: 1, measured: false } };
		expect(said([coil({ inductanceH: 1.02 * airH })], air).permeability?.value).toBeCloseTo(1.02, 6);
	});

	it('leaves out what no iron explains', () => {
		expect(said([coil({ inductanceH: 50 * airH })], cored).permeability).toBeNull();
	});
});
