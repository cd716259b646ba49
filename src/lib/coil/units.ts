import { z } from 'zod';
import { awgDiameterM, awgOfDiameter, metresPerInch } from './wire.ts';

/**
 * Typed values read generously into SI, and SI shown in the unit a person prefers. Where a text has two meanings it is
 * refused, not guessed.
 */

interface Unit {
	/** As it is shown. */
	symbol: string;
	/** SI value of a number in this unit, and back. */
	toSi(value: number): number;
	fromSi(value: number): number;
	/** Other spellings, lower case but for those that differ by case alone. */
	also: readonly string[];
}

const times = (symbol: string, factor: number, ...also: string[]): Unit => ({
	symbol,
	toSi: (value) => value * factor,
	fromSi: (value) => value / factor,
	also
});
/** For factors below one: a division by the whole number is exact where a product is not. */
const parts = (symbol: string, divisor: number, ...also: string[]): Unit => ({
	symbol,
	toSi: (value) => value / divisor,
	fromSi: (value) => value * divisor,
	also
});

const metresPerFoot = 0.3048;
const newtonsPerGramForce = 0.00980665;
const newtonsPerPoundForce = 4.4482216152605;
const kilogramsPerOunce = 0.028349523125;

const lengths = {
	mm: parts('mm', 1000, 'millimetre', 'millimetres', 'millimeter', 'millimeters'),
	cm: parts('cm', 100, 'centimetre', 'centimetres'),
	m: times('m', 1, 'metre', 'metres', 'meter', 'meters'),
	um: parts('µm', 1e6, 'um', 'micron', 'microns', 'μm'),
	inch: times('in', metresPerInch, '"', '″', '”', "''", 'inch', 'inches'),
	thou: {
		symbol: 'thou',
		toSi: (value: number) => (value * metresPerInch) / 1000,
		fromSi: (value: number) => (value / metresPerInch) * 1000,
		also: ['mil', 'mils', 'thous']
	},
	foot: times('ft', metresPerFoot, "'", '′', '’', 'foot', 'feet')
} satisfies Record<string, Unit>;

/** Every quantity, with its units; the first is the one of a bare number unless the person prefers another. */
export const quantities = {
	length: lengths,
	wireDiameter: {
		mm: lengths.mm,
		inch: lengths.inch,
		thou: lengths.thou,
		um: lengths.um,
		awg: { symbol: 'AWG', toSi: awgDiameterM, fromSi: awgOfDiameter, also: ['ga', 'gauge'] }
	},
	resistance: {
		ohm: times('Ω', 1, 'ω', 'ohm', 'ohms', 'r'),
		kilohm: times('kΩ', 1000, 'kω', 'k', 'kohm', 'kohms', 'kilohm', 'kilohms'),
		megohm: times('MΩ', 1e6, 'MΩ', 'M', 'Mohm', 'Mohms', 'meg', 'megohm', 'megohms')
	},
	ohmPerLength: {
		ohmPerM: times('Ω/m', 1, 'ohm/m', 'ω/m'),
		ohmPerFoot: {
			symbol: 'Ω/ft',
			toSi: (value: number) => value / metresPerFoot,
			fromSi: (value: number) => value * metresPerFoot,
			also: ['ohm/ft', 'ω/ft']
		},
		ohmPer1000Feet: {
			symbol: 'Ω/1000 ft',
			toSi: (value: number) => value / metresPerFoot / 1000,
			fromSi: (value: number) => value * metresPerFoot * 1000,
			also: ['ohm/1000ft', 'ω/1000ft', 'ohm/kft', 'ω/kft', 'ohm/1000 ft', 'ω/1000 ft']
		}
	},
	temperature: {
		celsius: times('°C', 1, 'c', 'celsius', 'ºc', '℃', '°'),
		fahrenheit: {
			symbol: '°F',
			toSi: (value: number) => ((value - 32) * 5) / 9,
			fromSi: (value: number) => (value * 9) / 5 + 32,
			also: ['f', 'fahrenheit', 'ºf', '℉']
		},
		kelvin: {
			symbol: 'K',
			toSi: (value: number) => value - 273.15,
			fromSi: (value: number) => value + 273.15,
			also: ['kelvin']
		}
	},
	inductance: {
		henry: times('H', 1, 'henry', 'henries'),
		millihenry: parts('mH', 1000, 'millihenry', 'millihenries'),
		microhenry: parts('µH', 1e6, 'uh', 'μh')
	},
	capacitance: {
		picofarad: parts('pF', 1e12, 'p'),
		nanofarad: parts('nF', 1e9, 'n'),
		microfarad: parts('µF', 1e6, 'uf', 'μf', 'u', 'µ', 'μ', 'mfd'),
		farad: times('F', 1, 'farad')
	},
	mass: {
		gram: parts('g', 1000, 'gram', 'grams'),
		kilogram: times('kg', 1, 'kilo', 'kilos', 'kilogram', 'kilograms'),
		milligram: parts('mg', 1e6),
		ounce: times('oz', kilogramsPerOunce, 'ounce', 'ounces'),
		pound: times('lb', 16 * kilogramsPerOunce, 'lbs', 'pound', 'pounds')
	},
	force: {
		newton: times('N', 1, 'newton', 'newtons'),
		centinewton: parts('cN', 100),
		gramForce: times('gf', newtonsPerGramForce, 'g', 'grams', 'gram'),
		poundForce: times('lbf', newtonsPerPoundForce, 'lb', 'lbs')
	},
	frequency: {
		hertz: times('Hz', 1, 'hertz'),
		kilohertz: times('kHz', 1000, 'k')
	},
	part: { percent: parts('%', 100, 'percent', 'per cent'), one: times('', 1) }
} satisfies Record<string, Record<string, Unit>>;

export type Quantity = keyof typeof quantities;
export type UnitOf<Q extends Quantity> = keyof (typeof quantities)[Q] & string;

export type Typed =
	| { ok: true; value: number }
	/** `number`: none can be read; `unit`: not one of this quantity's; `two-meanings`: the mark may be decimal or thousands. */
	| { ok: false; why: 'number' | 'unit' | 'two-meanings' };

const unitsOf = (quantity: Quantity): Record<string, Unit> => quantities[quantity];

/** The unit a word means, by exact spelling first: "M" is not "m". */
function unitNamed(quantity: Quantity, word: string): Unit | null {
	const units = Object.values(unitsOf(quantity));
	const exact = units.find((unit) => unit.symbol === word || unit.also.includes(word));
	if (exact) return exact;
	// Ω written as the ohm sign or in small letters is the same letter.
	const plain = word.toLowerCase();
	return (
		units.find((unit) => unit.symbol.toLowerCase() === plain || unit.also.includes(plain)) ??
		units.find((unit) => unit.also.some((spelling) => spelling.toLowerCase() === plain)) ??
		null
	);
}

/** Thousands set apart, alike each time. */
const grouped = /^\d{1,3}(?:([,.' ])\d{3})(?:\1\d{3})*$/;

/** A number with decimal point or comma; null where it is none, 'two' where one mark stands before just three digits. */
function typedNumber(text: string): number | null | 'two' {
	let digits = text.replace(/^[−–]/, '-').replace(/^\+/, '');
	const minus = digits.startsWith('-');
	if (minus) digits = digits.slice(1);
	const marks = digits.match(/[,.]/g) ?? [];
	const decimal = marks.at(-1);
	if (marks.length > 1 && decimal !== marks[0]) {
		// Two kinds of mark: the last is the decimal one, and what stands before it must be grouped.
		const last = digits.lastIndexOf(decimal!);
		const whole = digits.slice(0, last);
		if (!grouped.test(whole)) return null;
		digits = `${whole.replace(/[,.' ]/g, '')}.${digits.slice(last + 1)}`;
	} else if (/^[1-9]/.test(digits) && grouped.test(digits)) {
		// A lone point is decimal here, as it is wherever this product shows a number; a lone comma may be either.
		if (marks.length === 1 && decimal === ',') return 'two';
		if (marks.length !== 1) digits = digits.replace(/[,.' ]/g, '');
	} else digits = digits.replace(',', '.');
	if (!/^(?:\d{1,15}\.?\d{0,20}|\.\d{1,20})$/.test(digits)) return null;
	const value = Number(digits);
	return minus ? -value : value;
}

/** "7k5", "4R7", "22n": the letter stands for the decimal mark. */
const letterMark = /^(\d+)([a-zµμω])(\d+)$/i;

/**
 * One typed value.
 *
 * @param preferred unit of a bare number
 * @returns SI (temperatures in °C), exactly what was typed and no more
 */
export function typedValue<Q extends Quantity>(text: string, quantity: Q, preferred: UnitOf<Q>): Typed {
	const tidy = text.normalize('NFKC').replace(/\s+/g, ' ').trim();
	const preferredUnit = unitsOf(quantity)[preferred]!;
	const finish = (value: number | null | 'two', unit: Unit | null): Typed => {
		if (value === null) return { ok: false, why: 'number' };
		if (unit === null) return { ok: false, why: 'unit' };
		if (value === 'two') return { ok: false, why: 'two-meanings' };
		const si = unit.toSi(value);
		return Number.isFinite(si) ? { ok: true, value: si } : { ok: false, why: 'number' };
	};
	const letter = letterMark.exec(tidy);
	if (letter) {
		const unit = unitNamed(quantity, letter[2]!);
		// "7f5" is no notation of anything.
		if (quantity !== 'resistance' && quantity !== 'capacitance') return { ok: false, why: 'number' };
		return finish(Number(`${letter[1]}.${letter[3]}`), unit);
	}
	const ahead = /^(awg|ga|gauge)[ #.]*(\d.*)$/i.exec(tidy);
	if (ahead) return finish(typedNumber(ahead[2]!), unitNamed(quantity, ahead[1]!));
	const found = /^([-−–+]?[\d.,][\d.,' ]*?) ?([^\d.,' ].*|['"′″’”]+)?$/.exec(tidy);
	if (!found) return { ok: false, why: 'number' };
	const [, number = '', word] = found;
	return finish(typedNumber(number.trim()), word === undefined ? preferredUnit : unitNamed(quantity, word.trim()));
}

/**
 * A value in the unit a person prefers, without the unit: as many significant digits as asked for, zeros at the end kept
 * only before the decimal point. Plain decimals, which `typedValue` reads back.
 */
export function shownNumber<Q extends Quantity>(si: number, quantity: Q, unit: UnitOf<Q>, digits = 6): string {
	const value = unitsOf(quantity)[unit]!.fromSi(si);
	if (!Number.isFinite(value)) return '–';
	if (value === 0) return '0';
	const places = Math.max(0, Math.min(20, digits - 1 - Math.floor(Math.log10(Math.abs(value)))));
	const fixed = value.toFixed(places);
	const short = fixed.includes('.') ? fixed.replace(/\.?0+$/, '') : fixed;
	return short === '-0' || short === '' ? '0' : short;
}

/** The same with its unit: "0.063 mm", "AWG 42", "7.5 kΩ", "25 %". */
export function shownValue<Q extends Quantity>(si: number, quantity: Q, unit: UnitOf<Q>, digits = 6): string {
	const number = shownNumber(si, quantity, unit, digits);
	const { symbol } = unitsOf(quantity)[unit]!;
	if (symbol === 'AWG') return `AWG ${number}`;
	return symbol === '' ? number : `${number} ${symbol}`;
}

/** Units by which a person wants values shown. */
export const unitPreference = z.strictObject({
	length: z.enum(['mm', 'inch']),
	wireDiameter: z.enum(['awg', 'mm', 'inch']),
	temperature: z.enum(['celsius', 'fahrenheit']),
	resistance: z.enum(['kilohm', 'ohm']),
	mass: z.enum(['gram', 'ounce'])
});
export type UnitPreference = z.infer<typeof unitPreference>;

export const usualUnits: UnitPreference = {
	length: 'mm',
	wireDiameter: 'awg',
	temperature: 'celsius',
	resistance: 'kilohm',
	mass: 'gram'
};

/** A length of wire by the same choice as other lengths: metres or feet. */
export const wireLengthUnit = (units: UnitPreference): UnitOf<'length'> => (units.length === 'inch' ? 'foot' : 'm');
