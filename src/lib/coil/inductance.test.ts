import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import {
	airInductanceH,
	cores,
	inductanceRatio,
	meanLogDistance,
	mutualBesideH,
	mutualStackedH,
	permeabilityFrom,
	type Window
} from './inductance.ts';
import type { Result } from './refuse.ts';

function value<T>(result: Result<T>): T {
	if (!result.ok) throw new Error(`${result.field} ${result.got} is outside ${result.min} to ${result.max}`);
	return result.value;
}

/** A round coil by mean radius, depth and length. */
const round = (radius: number, depth: number, length: number): Window => ({
	straightM: 0,
	endDiameterM: 2 * radius - depth,
	windingDepthM: depth,
	traverseM: length
});
const mm = (straight: number, end: number, depth: number, traverse: number): Window => ({
	straightM: straight / 1000,
	endDiameterM: end / 1000,
	windingDepthM: depth / 1000,
	traverseM: traverse / 1000
});
const within = (actual: number, expected: number, relative: number) =>
	expect(Math.abs(actual / expected - 1)).toBeLessThan(relative);

describe('a round coil', () => {
	// Bureau of Standards J. Res. 7, 1931; Grover 1946; the constant as in a public unit test.
	it('of Brooks has 1.6994 µH', () => {
		within(value(airInductanceH(round(1, 2 / 3, 2 / 3), 1)), 1.6994e-6, 0.001);
	});

	// Lorenz, in Lyle, Phil. Trans. 1914 p. 429.
	it.each([
		[1, 2.07463e-6],
		[0.5, 2.885335e-6],
		[2, 1.08137 * 4e-7 * Math.PI]
	])('one wire deep and %f m long has %f H', (length, henry) => {
		within(value(airInductanceH(round(1, 0, length), 1)), henry, 1e-5);
	});

	// A published inductance matrix of reactor coils (public test data).
	it('of a reactor has 0.7954 H, and 0.2471 H with the one 2.125 m above', () => {
		const coil = { window: round(1.722, 0.719, 2.075), turns: 554 };
		within(value(airInductanceH(coil.window, coil.turns)), 0.7954, 0.01);
		within(value(mutualStackedH(coil, coil, 2.125)), 0.2471, 0.01);
	});

	// Numbers of an antenna-coil application note from memory; its formula 0.31(aN)²/(6a + 9h + 10b) in cm is 2.7 % low.
	it('of an antenna has 2.7 % more than the rule of thumb for it', () => {
		const { a, turns, h, b } = { a: 2.54, turns: 200, h: 0.05, b: 0.5 };
		const formulaH = (0.31 * (a * turns) ** 2) / (6 * a + 9 * h + 10 * b) / 1e6;
		within(formulaH, 3.8666e-3, 1e-4);
		within(value(airInductanceH(round(a / 100, h / 100, b / 100), turns)), 1.027 * formulaH, 0.002);
	});
});

// Lyle 1914, table 1.
it("a rectangle's geometric mean distance is 0.22313 to 0.22369 of its sides' sum in any shape", () => {
	fc.assert(
		fc.property(fc.double({ min: 0.001, max: 1000, noNaN: true }), (aspect) => {
			const part = Math.exp(meanLogDistance(1, aspect, 0, 0)) / (1 + aspect);
			expect(part).toBeGreaterThanOrEqual(0.22313);
			expect(part).toBeLessThanOrEqual(0.22369);
		})
	);
});

it('far rectangles are as far apart as their middles', () => {
	expect(meanLogDistance(1, 1, 6, 8)).toBeCloseTo(Math.log(10), 5);
	expect(meanLogDistance(1, 50, 0, 9)).toBeCloseTo(Math.log(450), 2);
});

describe('a racetrack', () => {
	// calc.
	it.each([
		['two-coil', mm(50.8, 6, 4.98, 6.2), 4900, 0.9164, 0.01],
		['flat', mm(51, 4.9, 4.1, 11.2), 8000, 1.664, 0.015],
		['wide', mm(50, 6, 9, 6.35), 10_000, 3.987, 0.015]
	])('of the %s kind has its inductance without iron', (_, window, turns, henry, relative) => {
		within(value(airInductanceH(window, turns)), henry, relative);
	});

	// calc: the elliptic formula, R 0.01 m, z 0.002 m.
	it.each([0, 1e-9])('with %f m of straight is the circle of the elliptic formula', (straightM) => {
		const filament = { window: { straightM, endDiameterM: 0.02, windingDepthM: 0, traverseM: 1e-6 }, turns: 1 };
		within(value(mutualStackedH(filament, filament, 0.002)), 2.15385601e-8, 1e-6);
	});

	it('whose straights vanish has the inductance of the round coil', () => {
		fc.assert(
			fc.property(
				fc.double({ min: 0.004, max: 0.04, noNaN: true }),
				fc.double({ min: 0.001, max: 0.01, noNaN: true }),
				fc.double({ min: 0.003, max: 0.02, noNaN: true }),
				(endDiameterM, windingDepthM, traverseM) => {
					const window = { endDiameterM, windingDepthM, traverseM };
					const circle = value(airInductanceH({ ...window, straightM: 0 }, 100));
					within(value(airInductanceH({ ...window, straightM: 1e-9 }, 100)), circle, 1e-5);
				}
			),
			{ numRuns: 10 }
		);
	});

	it('that is very long has per metre what two parallel wires have', () => {
		const [straightM, radius, apart] = [5, 0.01, 0.004];
		const filament = { window: { straightM, endDiameterM: 2 * radius, windingDepthM: 0, traverseM: 1e-6 }, turns: 1 };
		const longer = { ...filament, window: { ...filament.window, straightM: straightM + 1 } };
		const perM = value(mutualStackedH(longer, longer, apart)) - value(mutualStackedH(filament, filament, apart));
		// µ0/π · ln of distance to the far wire over distance to the near one.
		within(perM, 4e-7 * Math.log(Math.hypot(2 * radius, apart) / apart), 1e-4);
	});

	it('changes with its window as its ratio to one near it says', () => {
		const windows = [
			mm(50.8, 6, 5, 6.2),
			mm(51, 4.9, 4.1, 11.2),
			mm(50, 6, 9, 6.35),
			mm(0, 10, 5, 8),
			mm(0, 2, 0.5, 20)
		];
		for (const at of windows) {
			const deeper = { ...at, windingDepthM: 1.1 * at.windingDepthM };
			const full = value(airInductanceH(deeper, 5000)) / value(airInductanceH(at, 5000));
			within(value(inductanceRatio(at, deeper)), full, 0.003);
			expect(value(inductanceRatio(at, at))).toBe(1);
		}
	});

	it('with a winding of next to no depth has what a winding of none has', () => {
		const thin = mm(50.8, 6, 1e-7, 6.2);
		const none = value(airInductanceH({ ...thin, windingDepthM: 0 }, 100));
		within(value(airInductanceH(thin, 100)), none, 1e-4);
	});

	it('has four times the inductance with twice the turns in the same window', () => {
		const window = mm(51, 4.9, 4.1, 11.2);
		within(value(airInductanceH(window, 8000)), 4 * value(airInductanceH(window, 4000)), 1e-12);
		expect(value(airInductanceH(window, 0))).toBe(0);
	});
});

describe('two coils side by side', () => {
	const coil = { window: mm(50.8, 6, 5, 6.2), turns: 5000 };

	it('oppose one another when their currents run in one sense, and less the further apart', () => {
		let before = -Infinity;
		for (const spacingM of [0.0165, 0.018, 0.02, 0.03, 0.1]) {
			const mutual = value(mutualBesideH(coil, coil, spacingM));
			expect(mutual).toBeLessThan(0);
			expect(mutual).toBeGreaterThan(before);
			before = mutual;
		}
	});

	it('far apart are two dipoles', () => {
		const small = { window: { straightM: 0, endDiameterM: 0.02, windingDepthM: 0, traverseM: 1e-6 }, turns: 10 };
		// −µ0 m²/(4πd³) for moments m = N·area.
		within(value(mutualBesideH(small, small, 1)), -1e-7 * (10 * Math.PI * 0.01 ** 2) ** 2, 0.001);
	});

	it('see one another alike', () => {
		const other = { window: mm(48, 5, 4, 7), turns: 4000 };
		within(value(mutualBesideH(coil, other, 0.02)), value(mutualBesideH(other, coil, 0.02)), 1e-9);
	});

	it('of circles have what Neumann’s integral summed point by point gives', () => {
		const [a, b, beside] = [0.006, 0.004, 0.015];
		const steps = 400;
		let sum = 0;
		for (let i = 0; i < steps; i += 1) {
			for (let j = 0; j < steps; j += 1) {
				const p = (2 * Math.PI * i) / steps;
				const q = (2 * Math.PI * j) / steps;
				const r = Math.hypot(a * Math.cos(p) - b * Math.cos(q), a * Math.sin(p) - beside - b * Math.sin(q));
				sum += (a * b * Math.cos(p - q)) / r;
			}
		}
		const expected = 1e-7 * sum * ((2 * Math.PI) / steps) ** 2;
		const filament = (radius: number) => ({
			window: { straightM: 0, endDiameterM: 2 * radius, windingDepthM: 0, traverseM: 1e-6 },
			turns: 1
		});
		within(value(mutualBesideH(filament(a), filament(b), beside)), expected, 1e-4);
	});

	it('of racetracks have what Neumann’s integral summed point by point gives', () => {
		/** Points along a racetrack about (0, y), evenly spaced, with the step from one to the next. */
		const points = (straight: number, radius: number, y: number) => {
			const around = 2 * straight + 2 * Math.PI * radius;
			const steps = 1200;
			const at = (s: number): [number, number] => {
				const arc = Math.PI * radius;
				if (s < straight) return [-straight / 2 + s, y - radius];
				if (s < straight + arc) {
					const angle = (s - straight) / radius - Math.PI / 2;
					return [straight / 2 + radius * Math.cos(angle), y + radius * Math.sin(angle)];
				}
				if (s < 2 * straight + arc) return [straight / 2 - (s - straight - arc), y + radius];
				const angle = (s - 2 * straight - arc) / radius + Math.PI / 2;
				return [-straight / 2 + radius * Math.cos(angle), y + radius * Math.sin(angle)];
			};
			return Array.from({ length: steps }, (_, i) => {
				const [x1, y1] = at((i * around) / steps);
				const [x2, y2] = at((((i + 1) % steps) * around) / steps);
				return { x: (x1 + x2) / 2, y: (y1 + y2) / 2, dx: x2 - x1, dy: y2 - y1 };
			});
		};
		const first = points(0.05, 0.005, 0);
		const second = points(0.05, 0.006, 0.016);
		let sum = 0;
		for (const p of first)
			for (const q of second) sum += (p.dx * q.dx + p.dy * q.dy) / Math.hypot(p.x - q.x, p.y - q.y);
		const filament = (radius: number) => ({
			window: { straightM: 0.05, endDiameterM: 2 * radius, windingDepthM: 0, traverseM: 1e-6 },
			turns: 1
		});
		within(value(mutualBesideH(filament(0.005), filament(0.006), 0.016)), 1e-7 * sum, 1e-3);
	});

	it('that would run into one another are refused with the least distance', () => {
		expect(mutualBesideH(coil, coil, 0.01)).toMatchObject({ ok: false, field: 'spacingM', got: 0.01 });
		expect(mutualStackedH(coil, coil, 0.001)).toMatchObject({ ok: false, field: 'apartM' });
	});
});

describe('iron in the core', () => {
	it('is told by one measured coil', () => {
		expect(value(permeabilityFrom(2.2, 0.9164))).toBeCloseTo(2.4007, 4);
		expect(permeabilityFrom(0.1, 0.9)).toMatchObject({ ok: false, field: 'measuredH' });
	});

	it('stands in its own range in the table to start from', () => {
		for (const core of cores) {
			expect(core.usual).toBeGreaterThanOrEqual(core.min);
			expect(core.usual).toBeLessThanOrEqual(core.max);
		}
	});
});
