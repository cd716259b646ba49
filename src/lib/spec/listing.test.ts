import { describe, expect, it } from 'vitest';
import { usualUnits } from '../coil/units.ts';
import { kinds } from './content.ts';
import { specListing, specSentence } from './listing.ts';
import { startingSpec, tableWire } from './start.ts';

const two = startingSpec('two-coils', 'Evening bridge');
const value = (title: string, label: string, content = two) =>
	specListing(content, usualUnits, null)
		.find((group) => group.title === title)
		?.rows.find((row) => row.label === label)?.value;

describe('a spec as a list', () => {
	it('says each figure with its unit and each choice in words', () => {
		expect(value('Screw coil', 'Turns')).toBe('5,000 turns');
		expect(value('Slug coil', 'Pole that faces the strings')).toBe('north up');
		expect(value('Bobbin', 'Traverse')).toBe('6.2 mm');
		// 0.06334 mm: the exact gauge law (ASTM B258).
		expect(value('Wire', 'Bare diameter')).toBe('AWG 42, 0.06334 mm');
		expect(value('Wire', 'Enamel')).toBe('polyurethane, solders through');
		expect(value('What it plays into', 'Volume pot')).toBe('500 kΩ');
		expect(value('What it plays into', 'Cable, capacitance')).toBe('100 pF/m');
	});

	it('says what an empty field means, and leaves out words nobody wrote', () => {
		expect(value('What it plays into', 'Self-capacitance')).toBe('by the packing');
		expect(value('Leads, cover and potting', 'Potting')).toBeUndefined();
		expect(value('Looks', 'First look at', { ...two, looks: { every: 500, first: 0 } })).toBe('none');
	});

	it('tells how coils are joined only of two', () => {
		expect(value('Pickup', 'Coils joined')).toBe('in series');
		expect(value('Pickup', 'Coils joined', startingSpec('one-coil', 'Evening neck'))).toBeUndefined();
	});

	it('names the spool it is reckoned with', () => {
		const rows = specListing(two, usualUnits, 'Grey reel').flatMap((group) => group.rows);
		expect(rows).toContainEqual({ label: 'Spool', value: 'Grey reel' });
	});

	it.each(kinds)('has a line for its kind, %s', (kind) => {
		expect(specSentence(startingSpec(kind, 'Evening'), usualUnits)).toMatch(
			/^[A-Z].*AWG 42, single, polyurethane; Alnico 5/
		);
	});

	it('is one line with what it is', () => {
		const content = { ...two, strings: { spacingM: 0.0104, radiusM: null } };
		expect(specSentence(content, usualUnits)).toBe(
			'Two coils, in series; AWG 42, single, polyurethane; Alnico 5 bar; strings 10.4 mm apart.'
		);
	});

	it('tells the wire of the spool it is reckoned with', () => {
		const spool = tableWire('awg-43', 'heavy', 'oleoresinous');
		expect(specSentence(two, usualUnits, spool)).toMatch(/; AWG 43, heavy, plain oleoresinous; /);
	});
});
