import { describe, expect, it } from 'vitest';
import { responseDb, peakOf, type Circuit } from '../../src/lib/coil/response.ts';
import { spice } from './program.ts';

const plain: Circuit = {
	inductanceH: 2.5,
	resistanceOhm: 7500,
	coilF: 110e-12,
	lossOhm: null,
	volumePotOhm: 500e3,
	volume: 1,
	tonePotOhm: null,
	toneCapF: 0,
	tone: 1,
	cableF: 500e-12,
	inputOhm: 1e6
};
const withTone = { tonePotOhm: 500e3, toneCapF: 22e-9 };

const circuits: [string, Partial<Circuit>][] = [
	['everything up, no tone control', {}],
	['a pot of 250 kΩ', { volumePotOhm: 250e3 }],
	['a loss', { lossOhm: 400e3 }],
	['the volume at half', { volume: 0.5 }],
	['the volume at half, with a loss', { volume: 0.5, lossOhm: 400e3 }],
	['the volume low', { volume: 0.03 }],
	['a tone control up', withTone],
	['a tone control half down, with a loss', { ...withTone, tone: 0.4, lossOhm: 1e6 }],
	['a tone control all the way down', { ...withTone, tone: 0 }],
	[
		'both controls moved, a long cable and a poor input',
		{ ...withTone, tone: 0.1, volume: 0.7, cableF: 1.2e-9, inputOhm: 250e3 }
	],
	['another coil', { inductanceH: 6.1, resistanceOhm: 14_200, coilF: 180e-12, lossOhm: 700e3, ...withTone }]
];
const hertz = [82.4, 440, 1000, 2500, 4000, 5000, 9000];

/** The same circuit in the words of ngspice. A resistor of nothing is a thousandth of an ohm there. */
function netlist(c: Circuit): string {
	const ohm = (value: number) => Math.max(value, 1e-3);
	const lines = [
		'* pickup and load',
		'Vs string 0 AC 1',
		`Rc string inner ${c.resistanceOhm}`,
		`Lc inner top ${c.inductanceH}`,
		...(c.lossOhm === null ? [] : [`Rl inner top ${c.lossOhm}`]),
		`Cc top 0 ${c.coilF}`,
		`Ru top wiper ${ohm((1 - c.volume) * c.volumePotOhm)}`,
		`Rd wiper 0 ${ohm(c.volume * c.volumePotOhm)}`,
		`Ca wiper 0 ${c.cableF}`,
		`Ri wiper 0 ${c.inputOhm}`,
		...(c.tonePotOhm === null ? [] : [`Rt top mid ${ohm(c.tone * c.tonePotOhm)}`, `Ct mid 0 ${c.toneCapF}`]),
		'.control',
		'set numdgt=10',
		...hertz.flatMap((hz, i) => [`ac lin 1 ${hz} ${hz}`, `let at${i} = db(mag(v(wiper)))`, `print at${i}`]),
		'ac dec 20000 200 20000',
		'meas ac peakdb max vdb(wiper)',
		// Without it a run of commands alone ends as if it had failed.
		'quit 0',
		'.endc',
		'.end'
	];
	return `${lines.join('\n')}\n`;
}

describe('the response by ngspice', () => {
	it.each(circuits)('with %s is ours', (_, other) => {
		const circuit = { ...plain, ...other };
		const theirs = spice(netlist(circuit));
		const ours = responseDb(circuit, hertz);
		if (!ours.ok) throw new Error(ours.field);
		// A thousandth of an ohm in place of none, and ten digits printed.
		ours.value.forEach((db, i) => expect(Math.abs(db - theirs[`at${i}`]!), `${hertz[i]} Hz`).toBeLessThan(1e-5));
		const peak = peakOf(circuit);
		if (!peak.ok) throw new Error(peak.field);
		if (peak.value && peak.value.hz > 200) expect(Math.abs(peak.value.db - theirs.peakdb!)).toBeLessThan(1e-4);
	});
});
