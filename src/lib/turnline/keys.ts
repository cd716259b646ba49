/** Which verb carries which keys, in the order they are written, and what each may hold. Read by parser and formatter. */
import { holdMsMax, i16Max, i16Min, i32Max, i32Min, protocolVersion, u16Max, u32Max, wordCharsMax } from './limits.ts';

/** What a value may be. */
export type ValueForm =
	| { kind: 'integer'; min: number; max: number }
	/** 8 hex digits, upper case. */
	| { kind: 'boot' }
	| { kind: 'word' };

export interface KeySpec {
	key: string;
	form: ValueForm;
	required: boolean;
}

export interface VerbSpec {
	side: 'device' | 'host';
	keys: readonly KeySpec[];
	/** A person at a terminal may leave the checksum out. */
	bare: boolean;
}

const integer = (min: number, max: number): ValueForm => ({ kind: 'integer', min, max });
const u32 = integer(0, u32Max);
/** Numbers that start at 1: a kept line's own `n`, an event's own `e`. */
const ordinal = integer(1, u32Max);
const u16 = integer(1, u16Max);
const i32 = integer(i32Min, i32Max);
const i16 = integer(i16Min, i16Max);
const boot: ValueForm = { kind: 'boot' };
const word: ValueForm = { kind: 'word' };

const must = (key: string, form: ValueForm): KeySpec => ({ key, form, required: true });
const may = (key: string, form: ValueForm): KeySpec => ({ key, form, required: false });
const totals = (n: ValueForm, e: ValueForm) => [
	must('b', boot),
	must('n', n),
	must('e', e),
	must('f', u32),
	must('v', u32)
];
const device = (...keys: KeySpec[]): VerbSpec => ({ side: 'device', keys, bare: false });
const host = (...keys: KeySpec[]): VerbSpec => ({ side: 'host', keys, bare: false });

export const verbs: ReadonlyMap<string, VerbSpec> = new Map<string, VerbSpec>([
	[
		'HI',
		device(
			must('p', integer(protocolVersion, protocolVersion)),
			must('dev', word),
			may('fw', word),
			...totals(u32, u32),
			may('r', i16),
			must('t', u32),
			may('ppr', u16),
			may('dir', integer(0, 1)),
			may('rep', u16),
			may('buf', u32),
			may('pb', boot),
			may('pf', u32),
			may('pv', u32)
		)
	],
	['T', device(...totals(ordinal, u32), must('r', i16), must('t', u32), may('x', u32), may('g', u32))],
	[
		'E',
		device(...totals(ordinal, ordinal), may('r', i16), must('t', u32), must('k', word), may('x', u32), may('g', u32))
	],
	['OK', device(must('b', boot), must('id', u32))],
	['NO', device(must('b', boot), may('id', u32), may('why', word))],
	['BYE', device(may('b', boot))],
	['?', { side: 'host', keys: [], bare: true }],
	[
		'SET',
		host(
			must('id', u32),
			must('b', boot),
			must('tgt', i32),
			must('look', u32),
			must('ease', u32),
			must('stop', u32),
			may('from', i32),
			may('fst', u32)
		)
	],
	['STOP', { side: 'host', keys: [may('id', u32), may('b', boot)], bare: true }],
	['ACK', host(must('b', boot), must('n', u32), must('e', u32))],
	['SYNC', host(must('b', boot), must('e', u32))],
	['HOLD', host(must('ms', integer(0, holdMsMax)))],
	['TIME', host(must('u', u32))]
]);

const bootForm = /^[0-9A-F]{8}$/;
const wordForm = /^[!-}]+$/;

/** Whether a typed value is what its form allows. */
export function fits(form: ValueForm, value: unknown): boolean {
	if (form.kind === 'integer')
		return typeof value === 'number' && Number.isInteger(value) && value >= form.min && value <= form.max;
	if (typeof value !== 'string') return false;
	if (form.kind === 'boot') return bootForm.test(value);
	return value.length <= wordCharsMax && wordForm.test(value);
}

/**
 * The key at fault where values that fit one by one do not fit together, else null: retained totals come whole, and a
 * target differs from the coil's zero.
 */
export function misfit(
	verb: string,
	values: Record<string, unknown>
): { why: 'missing-key' | 'range'; key: string } | null {
	if (verb === 'HI') {
		const retained = ['pb', 'pf', 'pv'];
		const missing = retained.filter((key) => values[key] === undefined);
		if (missing.length > 0 && missing.length < retained.length) return { why: 'missing-key', key: missing[0]! };
	}
	if (verb === 'SET' && values.tgt === (values.from ?? 0)) return { why: 'range', key: 'tgt' };
	return null;
}
