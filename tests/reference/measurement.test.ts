import { expect, it } from 'vitest';
import { readingTo20C } from '../../src/lib/coil/measurement.ts';
import { ask } from './program.ts';

const script = `
import json, sys
from math import sqrt
from uncertainties import ufloat
asked = json.load(sys.stdin)
half = asked['percent'] / 100 * asked['ohm'] + asked['counts'] * asked['ohmPerCount']
reading = ufloat(asked['ohm'], half / sqrt(3))
temperature = ufloat(asked['celsius'], asked['half'] / sqrt(3))
at20 = reading / (1 + 0.00393 * (temperature - 20))
print(json.dumps([at20.nominal_value, at20.std_dev]))
`;

it.each([
	[7520, 27, 2, 0.5, 2, 10],
	[3655, 12, 3, 1, 5, 1],
	[15_230, 35, 0.5, 0.05, 3, 1],
	[220, 20, 0, 0.8, 2, 0.1]
])('python3-uncertainties says the same of %f Ω at %f ± %f °C', (ohm, celsius, half, percent, counts, ohmPerCount) => {
	const asked = { ohm, celsius, half, percent, counts, ohmPerCount };
	const [value, uncertainty] = JSON.parse(ask('/usr/bin/python3', ['-c', script], JSON.stringify(asked))) as number[];
	const ours = readingTo20C(ohm, celsius, half, { upToOhm: 1e6, percent, counts, ohmPerCount });
	if (!ours.ok) throw new Error(ours.field);
	expect(ours.value.ohm).toBeCloseTo(value!, 6);
	expect(ours.value.uncertaintyOhm).toBeCloseTo(uncertainty!, 6);
});
