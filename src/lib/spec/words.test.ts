import { describe, expect, it } from 'vitest';
import { judge, type Agreement, type Verdict } from '../coil/band.ts';
import { predict } from '../coil/predict.ts';
import { outside, type Refused } from '../coil/refuse.ts';
import { usualUnits, type UnitPreference } from '../coil/units.ts';
import { windCoil } from '../coil/winding.ts';
import { specInput } from './model.ts';
import { startingSpec } from './start.ts';
import {
	agreementWords,
	contributionWords,
	decibelSpanText,
	decimalText,
	mostWords,
	placesFor,
	plusMinus,
	plusMinusOf,
	refusedSentence,
	shares,
	shareText,
	spanText,
	typedSentence
} from './words.ts';

const imperial: UnitPreference = {
	length: 'inch',
	wireDiameter: 'inch',
	temperature: 'fahrenheit',
	resistance: 'ohm',
	mass: 'ounce'
};

describe('a decimal text', () => {
	it.each([
		[1440.4, 0, '1,440'],
		[-1440.46, 1, '−1,440.5'],
		[-0.04, 1, '0.0'],
		[1364.7, -1, '1,360'],
		[7467, -2, '7,500'],
		[49, -2, '0'],
		[0.00605, 3, '0.006'],
		[1234567, 0, '1,234,567']
	])('of %d to %d places is %s', (value, places, text) => {
		expect(decimalText(value, places)).toBe(text);
	});
});

describe('the digits of an uncertainty', () => {
	// The rule worked by hand: one digit from 4 up, two below.
	it.each([
		[0.41, 1],
		[0.4, 1],
		[0.31, 2],
		[0.0914, 2],
		[0.0187, 3],
		[2.24, 1],
		[38, 0],
		[19, 0],
		[727, -2],
		[1, 1],
		[0.1, 2],
		[1000, -2]
	])('%d ends at %d decimal places', (expanded, places) => {
		expect(placesFor(expanded)).toBe(places);
	});
});

describe('a figure with its ±', () => {
	it('shows twice its standard uncertainty, and no digit that is not known', () => {
		expect(plusMinus(7467, 363.6, 'resistance', 'kilohm')).toEqual({
			number: '7.5',
			unit: 'kΩ',
			value: '7.5 kΩ',
			half: '0.7',
			text: '7.5 kΩ ± 0.7'
		});
		expect(plusMinus(7318.66, 45.741, 'resistance', 'kilohm').text).toBe('7.32 kΩ ± 0.09');
		expect(plusMinus(7467, 363.6, 'resistance', 'ohm').text).toBe('7,500 Ω ± 700');
		expect(plusMinus(1364.68, 18.92, 'length', 'm').text).toBe('1,365 m ± 38');
		expect(plusMinus(1364.68, 9.4, 'length', 'm').text).toBe('1,365 m ± 19');
	});

	it('keeps zeros that are known', () => {
		expect(plusMinus(8000.2, 40, 'resistance', 'kilohm').text).toBe('8.00 kΩ ± 0.08');
		expect(plusMinusOf(50, 0.48, '%').text).toBe('50.0 % ± 1.0');
	});

	it('rounds an uncertainty up into the next power without a digit more', () => {
		expect(plusMinusOf(12.34, 0.048).text).toBe('12.34 ± 0.10');
		expect(plusMinusOf(12.34, 0.148).text).toBe('12.34 ± 0.30');
	});

	it('converts differences as differences', () => {
		expect(plusMinus(25, 1, 'temperature', 'fahrenheit').text).toBe('77.0 °F ± 3.6');
		expect(plusMinus(0.0162, 0.00112, 'length', 'inch').text).toBe('0.64 in ± 0.09');
	});

	it('shows an exact figure to four digits and without ±', () => {
		expect(plusMinus(0.12775, 0, 'resistance', 'ohm')).toMatchObject({ text: '0.1278 Ω', half: null });
		expect(plusMinusOf(0, 0).text).toBe('0');
		expect(plusMinusOf(5000, 0).text).toBe('5,000');
	});

	it('shows a value smaller than its ± to the same place', () => {
		expect(plusMinus(0.00065, 0.00056, 'length', 'mm').text).toBe('0.7 mm ± 1.1');
		expect(plusMinus(-0.00031, 0.00056, 'length', 'mm').text).toBe('−0.3 mm ± 1.1');
	});
});

describe('a span', () => {
	it('goes from the value less its ± to the value with it', () => {
		expect(spanText(2694.8, 224.9, 'frequency', 'kilohertz')).toBe('2.2–3.1 kHz');
		expect(decibelSpanText(5.53, 1.786)).toBe('+2 to +9 dB');
		expect(decibelSpanText(1, 1.8)).toBe('−3 to +5 dB');
	});

	it('never goes below nothing, and is a point where nothing is unsure', () => {
		expect(spanText(100, 80, 'frequency', 'hertz')).toBe('0–260 Hz');
		expect(spanText(4044.7, 0, 'frequency', 'kilohertz')).toBe('4.045 kHz');
		expect(decibelSpanText(12.21, 0)).toBe('+12.2 dB');
	});
});

describe('what an uncertainty comes from', () => {
	const parts = [
		{ name: 'packing', uncertainty: 3 },
		{ name: 'diameter', uncertainty: 4 }
	] as const;

	it('is told largest first, by shares of the square that add up to one', () => {
		const told = shares(parts);
		expect(told.map(({ words }) => words)).toEqual(['wire diameter', 'packing']);
		// 4² and 3² of 5².
		expect(told[0]!.share).toBeCloseTo(0.64, 12);
		expect(told[1]!.share).toBeCloseTo(0.36, 12);
	});

	it('leaves out of the remark what hardly matters', () => {
		expect(mostWords({ parts: [...parts] })).toBe('wire diameter, packing');
		expect(mostWords({ parts: [...parts, { name: 'scatter', uncertainty: 3.5 }] })).toBe(
			'wire diameter, spread from coil to coil'
		);
		expect(mostWords({ parts: [parts[1], { name: 'bobbin', uncertainty: 1 }] })).toBe('wire diameter');
		expect(mostWords({ parts: [] })).toBe('');
		expect(shares([])).toEqual([]);
	});

	it('does not call a small share none', () => {
		expect(shareText(0.004)).toMatch(/^under 1/);
		expect(shareText(0.914)).toBe('91\u00a0%');
	});

	it('has words for everything the computation names', () => {
		const prediction = predict(specInput(startingSpec('two-coils', 'Evening bridge')));
		if (!prediction.ok) throw new Error(prediction.field);
		const { figures, peakHz, peakDb } = prediction.value;
		const named = [...Object.values(figures), peakHz!, peakDb!].flatMap((figure) => figure.parts);
		expect(named.length).toBeGreaterThan(20);
		for (const { name } of named) expect(contributionWords[name]).toMatch(/^[a-zΩ]/);
	});
});

describe('a refusal in words', () => {
	const says = (refused: Refused, units = usualUnits) => refusedSentence(refused, units);

	it('names the field, its range in the person’s unit, what came, and what to do', () => {
		const content = startingSpec('two-coils', 'Evening bridge');
		content.wire.overallDiameterM = 0.00005;
		const refused = predict(specInput(content));
		if (refused.ok) throw new Error('taken');
		expect(says(refused)).toBe(
			'The overall diameter must lie between 0.06334 mm and 3 mm; it is 0.05 mm. Enamel makes wire thicker, never thinner: give it a little over the bare diameter.'
		);
		expect(says(refused, imperial)).toContain('between 0.002494 in and 0.1181 in; it is 0.001969 in');
	});

	it('tells which coil has turns that make no sense', () => {
		const content = startingSpec('two-coils', 'Evening bridge');
		content.coils[1]!.turns = 99_000;
		const refused = predict(specInput(content));
		if (refused.ok) throw new Error('taken');
		expect(says(refused)).toMatch(/^The turns of coil 2 must lie between 1 and 98,\d{3}; they are 99,000\. /);
	});

	it('says of two coils in one another that they are', () => {
		const content = startingSpec('two-coils', 'Evening bridge');
		content.coilSpacingM = 0.012;
		const refused = predict(specInput(content));
		if (refused.ok) throw new Error('taken');
		expect(says(refused)).toMatch(/middles of the two coils must be at least 16\.2 mm; it is 12 mm\..* further apart/);
	});

	it('says that there is no flange, or no number', () => {
		expect(says({ ok: false, field: 'bobbin.flangeOuterM', min: 0.006, max: 0.5, got: null })).toMatch(/has no flange/);
		expect(says({ ok: false, field: 'packing', min: 0.3, max: 1.1547, got: null })).toMatch(
			/^The packing must lie between 0\.3 and 1\.155; there is no number\./
		);
	});

	it('shows temperatures, gauges and pots as people say them', () => {
		expect(says({ ok: false, field: 'temperatureC', min: -40, max: 150, got: 200 }, imperial)).toContain(
			'between -40 °F and 302 °F; it is 392 °F'
		);
		expect(says({ ok: false, field: 'resistanceOhm', min: 270, max: 350_000, got: -1000 })).toContain('it is −1000 Ω');
		expect(says({ ok: false, field: 'wire.awg', min: 12, max: 58, got: 60 })).toContain('between AWG 12 and AWG 58');
		expect(says({ ok: false, field: 'load.volumePotOhm', min: 100, max: 1e12, got: 5 })).toContain(
			'must be at least 100 Ω; it is 5 Ω'
		);
		expect(says({ ok: false, field: 'marginM', min: 0, max: 0.00575, got: 0.006 })).toContain(
			'must be 5.75 mm at most; it is 6 mm'
		);
	});

	it('has a sentence even for a field it does not know', () => {
		expect(says({ ok: false, field: 'something[3].else', min: 1, max: 2, got: 3 })).toBe(
			'A figure must lie between 1 and 2; it is 3. Check the figure and its unit.'
		);
	});

	it('never leaves a name of the program in a sentence', () => {
		const bad = [
			windCoil({ ...specInput(startingSpec('one-coil', 'x')), turns: -1 }),
			outside([['lengthM', NaN, 0, 1]])!
		];
		for (const refused of bad) {
			if (refused.ok) throw new Error('taken');
			expect(says(refused)).not.toMatch(/[a-z][A-Z]|NaN|Infinity|undefined/);
		}
	});
});

describe('a verdict in words', () => {
	const expected = { ohm: 7500, uncertaintyOhm: 100 };
	const verdictOf = (ohm: number | null): Verdict => {
		const verdict = judge(ohm === null ? null : { ohm, uncertaintyOhm: 40 }, expected);
		if (!verdict.ok) throw new Error(verdict.field);
		return verdict.value;
	};

	it('is good only where nothing is to be done', () => {
		expect(agreementWords(verdictOf(7550))).toEqual({
			word: 'Agrees',
			sentence: '0.7 % above what was expected, within what both may be off.',
			good: true
		});
		expect(agreementWords(verdictOf(7500)).sentence).toBe('It measures what was expected.');
		const words: Partial<Record<Agreement, string>> = {};
		for (const ohm of [8200, 7000, 1e6, 10, null]) {
			const verdict = verdictOf(ohm);
			const said = agreementWords(verdict);
			expect(said.good).toBe(false);
			words[verdict.agreement] = said.word;
		}
		expect(words).toEqual({ above: 'Too high', below: 'Too low', open: 'Open', short: 'Short' });
	});

	it('says by how much and how far beyond the band', () => {
		// 700 of 7500, against 2·√(100² + 40²) = 215.4.
		expect(agreementWords(verdictOf(8200)).sentence).toMatch(
			/^9\.3 % above what was expected, 3\.2 times what both may be off:/
		);
		expect(agreementWords(verdictOf(7500 + 216)).sentence).toContain('just beyond what both may be off');
	});
});

describe('what was typed and is no value', () => {
	it('is quoted and kept', () => {
		expect(typedSentence('number', ' ten ')).toBe('“ten” is no number that can be read. It was kept as typed.');
		expect(typedSentence('unit', '7 apples')).toMatch(/unit that does not belong here/);
		expect(typedSentence('two-meanings', '7,500')).toMatch(/two ways/);
		expect(typedSentence('number', '')).toBe('Nothing was typed.');
	});
});
