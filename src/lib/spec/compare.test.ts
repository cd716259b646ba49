import { describe, expect, it } from 'vitest';
import { usualUnits } from '../coil/units.ts';
import { compareSpecs, type Effect, type Side } from './compare.ts';
import { specContent, type SpecContent } from './content.ts';
import { predictSpec } from './model.ts';
import { startingSpec, tableWire } from './start.ts';

const side = (content: SpecContent, more: Partial<Side> = {}): Side => ({
	content,
	spoolWire: null,
	spoolName: null,
	...more
});
const evening = (): SpecContent => startingSpec('two-coils', 'Evening bridge');
function changed(change: (content: SpecContent) => void): SpecContent {
	const content = evening();
	change(content);
	return content;
}
const compared = (b: SpecContent, a = evening()) => compareSpecs(side(a), side(b), usualUnits);
/** Every field of a content in words: beside itself it has nothing else. */
const fields = (content: SpecContent, units = usualUnits) => compareSpecs(side(content), side(content), units).same;
function moved(effect: Effect | null): string[] {
	if (!effect?.ok) throw new Error('refused');
	return effect.figures.filter((figure) => figure.moved).map(({ key }) => key);
}
function figure(effect: Effect | null, key: string) {
	if (!effect?.ok) throw new Error('refused');
	const found = effect.figures.find((each) => each.key === key);
	if (!found) throw new Error(`no ${key}`);
	return found;
}

/** What is one of a few, where the words of it are looked up. */
const others: Record<string, unknown> = { kind: 'other', 'wire.material': 'polyester' };
function otherOf(value: unknown): unknown {
	if (typeof value === 'number') return Number.isInteger(value) ? value + 1 : value * 1.001;
	if (typeof value === 'boolean') return !value;
	return value === null ? 0.0123 : `${String(value)}x`;
}

/** Every single value of a content by its path, with the content in which it alone is another. */
function everyLeaf(content: SpecContent): [path: string, other: SpecContent][] {
	const found: [string, SpecContent][] = [];
	const walk = (at: unknown, path: (string | number)[]) => {
		if (at !== null && typeof at === 'object') {
			for (const key of Object.keys(at)) walk((at as Record<string, unknown>)[key], [...path, key]);
			return;
		}
		const other = structuredClone(content) as unknown as Record<string, unknown>;
		let parent = other;
		for (const key of path.slice(0, -1)) parent = parent[key] as Record<string, unknown>;
		const last = path.at(-1)!;
		parent[last] = others[path.join('.')] ?? otherOf(at);
		found.push([path.join('.'), other as unknown as SpecContent]);
	};
	walk(content, []);
	return found;
}

describe('the fields of a spec', () => {
	it('are told in the units of the person, each with its group and label', () => {
		const told = fields(evening());
		const say = (key: string) => told.find((field) => field.key === key)?.a;
		expect(say('bobbin.straightM')).toBe('50.8 mm');
		expect(say('bobbin.name')).toBe('One of two coils side by side (generic figures)');
		expect(say('wire.sizeKey')).toBe('AWG 42 by the exact gauge law, 0.06334 mm bare');
		expect(say('coils.1.turns')).toBe('5,000 turns');
		expect(say('load.volumePotOhm')).toBe('500 kΩ');
		expect(say('strings.radiusM')).toBe('flat');
		expect(say('spoolId')).toBe('none chosen');
		const inches = fields(evening(), { ...usualUnits, length: 'inch' });
		expect(inches.find(({ key }) => key === 'bobbin.straightM')?.a).toBe('2 in');
		for (const { group, label, a } of told) expect([group, label, a].every((words) => words !== '')).toBe(true);
		expect(new Set(told.map(({ key }) => key)).size).toBe(told.length);
	});

	it('have no second coil where there is none', () => {
		const told = fields(startingSpec('one-coil', 'Evening neck'));
		expect(told.some(({ key }) => key.startsWith('coils.1'))).toBe(false);
		expect(told.find(({ key }) => key === 'coils.0.turns')?.group).toBe('Coil');
	});

	it.each(everyLeaf(evening()))('hold %s, and it alone is found to differ, in other words', (_path, other) => {
		const { changed: differ } = compared(other);
		expect(differ).toHaveLength(1);
		expect(differ[0]!.a).not.toBe(differ[0]!.b);
	});
});

describe('two revisions', () => {
	it('that are the same differ in nothing', () => {
		const { changed: differ, same, together } = compared(evening());
		expect(differ).toEqual([]);
		expect(together).toBeNull();
		for (const { a, b } of same) expect(a).toBe(b);
	});

	it('have each field once, changed or the same', () => {
		const { changed: differ, same } = compared(
			changed((content) => {
				content.coils[0]!.turns = 5200;
				content.potting = 'wax';
			})
		);
		expect(differ.map(({ key }) => key)).toEqual(['coils.0.turns', 'potting']);
		const keys = [...differ, ...same].map(({ key }) => key);
		expect(keys.sort()).toEqual(
			fields(evening())
				.map(({ key }) => key)
				.sort()
		);
	});

	it('say what more turns alone do: more ohms, wire and inductance, a lower peak', () => {
		const b = changed((content) => (content.coils[0]!.turns = 5200));
		const [turns] = compared(b).changed;
		expect(moved(turns!.effect)).toEqual(expect.arrayContaining(['resistanceOhm', 'lengthM', 'inductanceH', 'peakHz']));
		const before = predictSpec(evening());
		const after = predictSpec(b);
		if (!before.ok || !after.ok) throw new Error('refused');
		const difference = after.value.figures.resistanceOhm.value - before.value.figures.resistanceOhm.value;
		expect(figure(turns!.effect, 'resistanceOhm').difference).toMatch(
			new RegExp(`^\\+${(difference / 1000).toFixed(3)} kΩ \\(\\+2\\.\\d %\\)$`)
		);
		expect(figure(turns!.effect, 'coils.1.resistanceOhm').moved).toBe(false);
		expect(figure(turns!.effect, 'peakHz').difference).toMatch(/^−\d\d\.\d Hz \(−\d\.\d %\)$/);
	});

	it('say that words move nothing', () => {
		const [words] = compared(changed((content) => (content.magnet.material = 'Alnico 2'))).changed;
		expect(moved(words!.effect)).toEqual([]);
	});

	it('say that the load moves the peak and nothing of the coil', () => {
		const [pot] = compared(changed((content) => (content.load.volumePotOhm = 250e3))).changed;
		expect(moved(pot!.effect)).toEqual(['peakHz', 'peakDb']);
	});

	it('show each change alone, and all together as the second revision is predicted', () => {
		const b = changed((content) => {
			content.coils[0]!.turns = 5300;
			content.packing.value = 0.84;
		});
		const { changed: differ, together } = compared(b);
		expect(differ.map(({ key }) => key)).toEqual(['packing.value', 'coils.0.turns']);
		const direct = compareSpecs(side(b), side(evening()), usualUnits);
		expect(figure(together, 'resistanceOhm').b).toBe(figure(direct.together, 'resistanceOhm').a);
		expect(figure(together, 'coils.1.windingDepthM').difference).toMatch(/^−/);
		expect(figure(differ[1]!.effect, 'coils.1.windingDepthM').difference).toBe('none');
	});

	it('judge a difference against what coils wound alike differ by', () => {
		const by = (turns: number) =>
			figure(compared(changed((content) => (content.coils[0]!.turns = turns))).together, 'resistanceOhm').besideScatter;
		// Half a hundredth from coil to coil (the model's own, without kept coils): two differ by 2·√2·0.5 %, 0.11 of 7.5 kΩ.
		expect(by(5030)).toEqual({ alike: '0.11 kΩ', more: false });
		expect(by(5300)).toEqual({ alike: '0.11 kΩ', more: true });
		const more = compared(changed((content) => (content.coils[0]!.turns = 5300))).together;
		expect(figure(more, 'lengthM').besideScatter).toBeNull();
		expect(figure(more, 'coilF').besideScatter).toBeNull();
	});

	it('tell a difference too small for any instrument from one that shows, and from none', () => {
		const tiny = compared(changed((content) => (content.bobbin.straightM *= 1 + 1e-5))).together;
		expect(figure(tiny, 'resistanceOhm')).toMatchObject({ difference: 'under 0.01 %', moved: false });
		expect(figure(tiny, 'copperFill')).toMatchObject({ difference: 'none', moved: false });
	});

	it('name the field at fault where a change alone makes no sense', () => {
		const few = (content: SpecContent) => content.coils.forEach((coil) => (coil.turns = 3000));
		const b = changed((content) => {
			few(content);
			content.wire = tableWire('awg-40', 'single');
		});
		const { changed: differ, together } = compared(b, changed(few));
		const size = differ.find(({ key }) => key === 'wire.sizeKey');
		// The thicker wire in the enamel of the thinner one.
		expect(size?.effect).toMatchObject({ ok: false, refused: { field: 'wire.overallDiameterM' } });
		expect(together?.ok).toBe(true);
	});

	it('take a second coil with how it is joined, and compare it with nothing', () => {
		const one = evening();
		one.coils = one.coils.slice(0, 1);
		one.wiring = 'single';
		specContent.parse(one);
		const { changed: differ } = compared(evening(), one);
		const count = differ.find(({ key }) => key === 'coils.length')!;
		expect(count).toMatchObject({ a: 'one', b: 'two' });
		expect(moved(count.effect)).toContain('resistanceOhm');
		expect(figure(count.effect, 'coils.1.resistanceOhm')).toMatchObject({ a: 'none', difference: 'cannot be told' });
		const turns = differ.find(({ key }) => key === 'coils.1.turns')!;
		expect(turns).toMatchObject({ a: null, b: '5,000 turns', effect: null });
	});

	it('reckon with the wire of the spool, and say what another spool does', () => {
		const spool = { ...evening().wire, ohmPerM: 5.6 };
		const a = side(evening());
		const b = side(
			changed((content) => (content.spoolId = 'b')),
			{ spoolWire: spool, spoolName: 'Lot 7' }
		);
		const { changed: differ } = compareSpecs(a, b, usualUnits);
		expect(differ).toHaveLength(1);
		expect(differ[0]).toMatchObject({ key: 'spoolId', a: 'none chosen', b: 'Lot 7' });
		expect(moved(differ[0]!.effect)).toContain('resistanceOhm');
	});

	it('tell a peak from none', () => {
		const [pot] = compared(changed((content) => (content.load.volumePotOhm = 10e3))).changed;
		expect(figure(pot!.effect, 'peakHz')).toMatchObject({ b: 'none', difference: 'cannot be told', moved: true });
	});
});
