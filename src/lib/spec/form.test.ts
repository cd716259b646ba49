import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { anySpec, anyUnits } from '../../../tests/spec-arbitrary.ts';
import { usualUnits, type UnitPreference } from '../coil/units.ts';
import { kinds, specContent, type SpecContent } from './content.ts';
import {
	bobbinFrom,
	coilsTyped,
	fillBobbin,
	fillChosen,
	fillCores,
	fillCover,
	fillKind,
	fillPacking,
	readSpec,
	refusalErrors,
	specFields,
	specMeasures,
	writeSpec,
	type SpecTyped
} from './form.ts';
import { predictSpec } from './model.ts';
import { genericBobbin, startingSpec } from './start.ts';

const inches: UnitPreference = { ...usualUnits, length: 'inch', wireDiameter: 'inch', resistance: 'ohm' };
const two = startingSpec('two-coils', 'Evening bridge');
const one = startingSpec('one-coil', 'Evening neck');

function changed(change: Partial<SpecTyped>, base: SpecContent = two, units = usualUnits) {
	return readSpec({ ...writeSpec(base, units), ...change }, units, base);
}

function taken(change: Partial<SpecTyped>, base: SpecContent = two, units = usualUnits): SpecContent {
	const read = changed(change, base, units);
	if (!read.ok) throw new Error(JSON.stringify(read.errors));
	return read.content;
}

function refused(change: Partial<SpecTyped>, base: SpecContent = two, units = usualUnits) {
	const read = changed(change, base, units);
	if (read.ok) throw new Error('it was taken');
	return read;
}

describe('a spec in a form', () => {
	it.each(kinds)('of the kind %s comes back exactly as it was stored, in any units', (kind) => {
		fc.assert(
			fc.property(anySpec(kind), anyUnits, (content, units) => {
				expect(specContent.parse(content)).toEqual(content);
				expect(readSpec(writeSpec(content, units), units, content)).toEqual({ ok: true, content });
			})
		);
	});

	it.each(kinds)('of the kind %s comes back to the digits shown when what it was is not known', (kind) => {
		const content = startingSpec(kind, 'Evening bridge');
		fc.assert(
			fc.property(anyUnits, (units) => {
				const read = readSpec(writeSpec(content, units), units, null);
				if (!read.ok) throw new Error(JSON.stringify(read.errors));
				// Listed bobbins and wires are meant exactly; the rest has six digits at least.
				expect(read.content.bobbin).toEqual(content.bobbin);
				expect(read.content.wire).toEqual(content.wire);
				expect(read.content.coils).toEqual(content.coils);
				expect(read.content.load.volumePotOhm).toBeCloseTo(content.load.volumePotOhm, 0);
				expect(read.content.leads.lengthM).toBeCloseTo(content.leads.lengthM, 5);
			})
		);
	});

	it('holds every field as a text', () => {
		const typed = writeSpec(one, usualUnits);
		expect(Object.keys(typed).sort()).toEqual([...specFields].sort());
		for (const field of specFields) expect(typeof typed[field], field).toBe('string');
	});

	it('is read generously', () => {
		expect(taken({ coil1Turns: '5 320', coil2Turns: '5.240 turns' }).coils.map(({ turns }) => turns)).toEqual([
			5320, 5240
		]);
		expect(taken({ packing: '82 %' }).packing.value).toBeCloseTo(0.82, 12);
		expect(taken({ bobbinTraverse: '0.25 in' }).bobbin.traverseM).toBeCloseTo(0.00635, 12);
		expect(taken({ volumePot: '1M' }).load.volumePotOhm).toBe(1e6);
		expect(taken({ volumePot: '500k' }, two, inches).load.volumePotOhm).toBe(500e3);
		expect(taken({ toneCap: '22n' }).load.toneCapF).toBeCloseTo(22e-9, 15);
		expect(taken({ cableFPerM: '100 pF/m' }, two, inches).load.cableFPerM).toBeCloseTo(100e-12, 18);
		expect(taken({ cableFPerM: '30 pF/ft' }).load.cableFPerM).toBeCloseTo(30e-12 / 0.3048, 18);
		expect(taken({ name: '  Late\tbridge ' }).name).toBe('Late bridge');
	});

	it('takes empty fields where empty means something', () => {
		const content = taken({
			stringSpacing: '',
			stringRadius: ' ',
			bobbinFlange: '',
			coilSpacing: '',
			tonePot: '',
			coilF: '',
			loss: '',
			wireOverallMin: '',
			wireOverallMax: '',
			wireOhmPerM: '',
			potting: '',
			notes: ''
		});
		expect(content.strings).toEqual({ spacingM: null, radiusM: null });
		expect(content.bobbin.flangeOuterM).toBeNull();
		expect(content.coilSpacingM).toBeNull();
		expect(content.load).toMatchObject({ tonePotOhm: null, coilF: null, lossOhm: null });
		expect(content.wire).toMatchObject({ overallMinM: null, overallMaxM: null, ohmPerM: null });
		expect(predictSpec(content).ok).toBe(true);
	});

	it('keeps the second coil’s texts while one coil is meant', () => {
		const typed = { ...writeSpec(two, usualUnits), coil2Turns: '4,850', kind: 'one-coil' };
		const single = readSpec(typed, usualUnits, two);
		expect(single.ok && single.content).toMatchObject({
			coils: [{ turns: 5000 }],
			wiring: 'single',
			coilSpacingM: null
		});
		const again = readSpec({ ...typed, kind: 'two-coils' }, usualUnits, two);
		expect(again.ok && again.content.coils[1]!.turns).toBe(4850);
		expect(coilsTyped({ kind: 'other', coilCount: '2' })).toBe(2);
		expect(coilsTyped({ kind: 'wide-one-coil', coilCount: '2' })).toBe(1);
	});

	it('joins a second coil in series until somebody says otherwise', () => {
		const typed = { ...writeSpec(one, usualUnits), kind: 'two-coils' };
		expect(fillKind(typed, 1).wiring).toBe('series');
		expect(fillKind({ ...typed, wiring: 'parallel' }, 1).wiring).toBe('parallel');
		expect(fillKind({ ...typed, wiring: 'single' }, 2).wiring).toBe('single');
	});
});

describe('choosing', () => {
	const typed = writeSpec(two, usualUnits);

	it('a generic bobbin fills its figures, which are generic until one is changed', () => {
		const filled = fillBobbin({ ...typed, bobbinGeneric: 'wide' }, inches);
		const read = readSpec({ ...writeSpec(two, inches), ...filled }, inches, two);
		expect((read.ok ? read.content : read.partial).bobbin).toEqual(genericBobbin('wide'));
		const own = taken({ bobbinTraverse: '6.3' }).bobbin;
		expect(own).toMatchObject({ generic: null, traverseM: 0.0063, straightM: 0.0508 });
	});

	it('another spec’s bobbin brings its figures and its guide stops', () => {
		const bobbin = { ...genericBobbin('wide'), name: 'Grey bobbin', generic: null, guideStops: 'holes 3 and 9' };
		expect(taken(bobbinFrom(bobbin, typed, usualUnits)).bobbin).toEqual(bobbin);
	});

	it('a way of winding, cores and a cover fill their usual figures', () => {
		expect(taken(fillPacking({ ...typed, packingKey: 'layered' }, usualUnits)).packing).toMatchObject({
			key: 'layered',
			value: 1
		});
		expect(taken(fillCores({ ...typed, coreKey: 'air' }, usualUnits)).cores).toMatchObject({
			key: 'air',
			effectivePermeability: 1
		});
		expect(taken(fillCover({ ...typed, coverKey: 'brass' }, usualUnits)).load.lossOhm).toBe(250e3);
		expect(taken(fillCover({ ...typed, coverKey: 'none', loss: '250' }, usualUnits)).load.lossOhm).toBeNull();
	});

	it('without scripts fills what was left as it was, and nothing that was typed', () => {
		const sent = {
			...typed,
			coverKey: 'brass',
			packingKey: 'layered',
			packing: '0.97',
			wireSize: 'awg-43',
			bobbinGeneric: 'wide'
		};
		const filled = fillChosen(sent, usualUnits, two);
		expect(filled.loss).toBe('250');
		expect(filled.packing).toBe('0.97');
		expect(filled.wireDiameter).toBe('AWG 43');
		expect(filled.bobbinTraverse).toBe('6.35');
		expect(filled.bobbinName).toBe('One wide, low coil');
		expect(fillChosen(typed, usualUnits, two)).toEqual(typed);
	});
});

describe('what was measured', () => {
	it('stays measured while its field says so, and no longer', () => {
		const measured: SpecContent = {
			...two,
			packing: { ...two.packing, value: 0.8123456789, measured: true },
			cores: { ...two.cores, effectivePermeability: 2.31, measured: true }
		};
		expect(taken({}, measured)).toEqual(measured);
		expect(taken({ packing: '0.81' }, measured).packing.measured).toBe(false);
		expect(taken({ permeability: '2.4' }, measured).cores.measured).toBe(false);
		expect(taken({ packing: '0.83', packingMeasured: '0.83' }).packing).toMatchObject({ value: 0.83, measured: true });
	});
});

describe('a spec refused', () => {
	it('names the field, the range in the person’s unit and what was kept', () => {
		expect(refused({ bobbinTraverse: '900' }).errors).toEqual({
			bobbinTraverse: 'Traverse: 0.5 to 100 mm; “900” was kept as typed.'
		});
		expect(refused({ bobbinTraverse: '900' }, two, inches).errors).toEqual({
			bobbinTraverse: 'Traverse: 0.0197 to 3.937 in; “900” was kept as typed.'
		});
		expect(refused({ coil2Turns: '' }).errors).toEqual({
			coil2Turns: 'Slug coil, turns: 1 to 100,000 turns; nothing was typed.'
		});
		expect(refused({ name: ' ' }).errors).toEqual({ name: 'Name: 1 to 80 characters; nothing was typed.' });
		expect(refused({ mounting: 'x'.repeat(121) }).errors).toEqual({
			mounting: 'Mounting: up to 120 characters; 121 were kept as typed.'
		});
		expect(refused({ kind: 'four-coils' }).errors.kind).toMatch(/choose one of one coil, two coils/);
	});

	it('says of a comma with two meanings to write a point', () => {
		expect(refused({ bobbinStraight: '1,234' }).errors.bobbinStraight).toMatch(
			/“1,234” may set off decimals or thousands/
		);
		expect(refused({ volumePot: '1,500' }, two, inches).errors.volumePot).toMatch(/kept as typed/);
	});

	it('says of every measured field that is wrong which one it is', () => {
		for (const [field, { label }] of Object.entries(specMeasures(usualUnits))) {
			const { errors } = refused({ [field]: '1e5 parsecs' });
			expect(errors[field as keyof typeof errors], field).toContain(`${label}: `);
			expect(errors[field as keyof typeof errors], field).toContain('kept as typed');
		}
	});

	it('has looks that the coil has no turns for', () => {
		expect(refused({ coil1Turns: '300' }).errors).toEqual({
			lookEvery: 'Look every: 0 for none, or 10 to 300 turns, no more than the coil has; “500” was kept as typed.'
		});
		expect(taken({ coil1Turns: '300', lookEvery: '0' }).looks.every).toBe(0);
	});

	it('has a flange narrower than its core', () => {
		expect(refused({ bobbinFlange: '5' }).errors.bobbinFlange).toMatch(/at least the core’s width, 6 mm/);
	});

	it('goes on with the value before of that field alone', () => {
		const last = { ...two, coils: [{ ...two.coils[0]!, turns: 4900 }, two.coils[1]!] };
		const typed = { ...writeSpec(two, usualUnits), coil1Turns: '', packing: '0.85' };
		const read = readSpec(typed, usualUnits, two, last);
		if (read.ok) throw new Error('it was taken');
		expect(read.partial.coils[0]!.turns).toBe(4900);
		expect(read.partial.packing.value).toBe(0.85);
		expect(specContent.safeParse(read.partial).success).toBe(true);
	});

	it('by the computation, says so under the field it is about', () => {
		const deep = predictSpec(taken({ coil2Turns: '90000', bobbinTraverse: '1' }));
		if (deep.ok) throw new Error('it was taken');
		expect(Object.keys(refusalErrors(deep, usualUnits))).toEqual(['coil2Turns']);
		const close = predictSpec(taken({ coilSpacing: '2' }));
		if (close.ok) throw new Error('it was taken');
		expect(refusalErrors(close, usualUnits).coilSpacing).toMatch(/at least/);
	});

	it('by the computation, always has a field to stand under', () => {
		fc.assert(
			fc.property(fc.constantFrom(...kinds).chain(anySpec), (content) => {
				const predicted = predictSpec(content);
				if (!predicted.ok) expect(Object.keys(refusalErrors(predicted, usualUnits))).toHaveLength(1);
			}),
			{ numRuns: 40 }
		);
	});
});
