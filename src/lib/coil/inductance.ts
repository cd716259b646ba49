import { outside, ok, type Result } from './refuse.ts';

/**
 * Inductance of coils without iron, by filaments (Maxwell, Neumann, Grover): the window of the winding is split into
 * near-square cells, each a racetrack filament in its middle, and L = N² · mean of all mutual inductances. Metres, henries.
 */

const mu0 = 4e-7 * Math.PI;

/** Window of a winding on a racetrack core; `straightM` 0 is a round coil. */
export interface Window {
	straightM: number;
	/** Width of the core inside the winding: the diameter of its half circles. */
	endDiameterM: number;
	windingDepthM: number;
	traverseM: number;
}

/** Nodes and weights of Gauss–Legendre quadrature on 0 to 1. */
interface Rule {
	at: Float64Array;
	weight: Float64Array;
}

const rules = new Map<number, Rule>();

function gauss(n: number): Rule {
	const known = rules.get(n);
	if (known) return known;
	const rule: Rule = { at: new Float64Array(n), weight: new Float64Array(n) };
	for (let i = 0; i < n; i += 1) {
		let x = Math.cos((Math.PI * (i + 0.75)) / (n + 0.5));
		let slope = 1;
		// Newton's method on the Legendre polynomial doubles the digits each time: eight steps are more than enough.
		for (let step = 0; step < 8; step += 1) {
			let before = 1;
			let now = x;
			for (let k = 2; k <= n; k += 1) [before, now] = [now, ((2 * k - 1) * x * now - (k - 1) * before) / k];
			slope = (n * (x * now - before)) / (x * x - 1);
			x -= now / slope;
		}
		rule.at[i] = (1 - x) / 2;
		rule.weight[i] = 1 / ((1 - x * x) * slope * slope);
	}
	rules.set(n, rule);
	return rule;
}

/**
 * Mutual inductance of two coaxial circles: Maxwell's formula µ0√(ab)·((2/k − k)K − (2/k)E), with the complete elliptic
 * integrals by the arithmetic–geometric mean in a form that loses no digits to cancellation.
 */
function circles(a: number, b: number, apart: number): number {
	const far = (a + b) ** 2 + apart ** 2;
	const k = Math.sqrt((4 * a * b) / far);
	let mean = 1;
	let geometric = Math.sqrt(((a - b) ** 2 + apart ** 2) / far);
	let sum = 0;
	for (let power = 1; power < 1 << 12; power *= 2) {
		const half = (mean - geometric) / 2;
		sum += power * half * half;
		geometric = Math.sqrt(mean * geometric);
		mean -= half;
		if (half < 1e-9) break;
	}
	return mu0 * Math.sqrt(a * b) * (2 / k) * (Math.PI / (2 * mean)) * sum;
}

/** ∫∫ dx dx′/√((x − x′)² + ρ²) over two parallel straights of lengths s and t whose middles face one another. */
function straights(s: number, t: number, apart: number): number {
	const part = (u: number) => u * Math.asinh(u / apart) - Math.hypot(u, apart);
	return 2 * (part((s + t) / 2) - part((s - t) / 2));
}

/** ∫ over both straights at ±`straightRadius` and both end arcs of `arcRadius`, coaxial. */
function straightsToArcs(
	straight: number,
	straightRadius: number,
	arcRadius: number,
	apart: number,
	rule: Rule
): number {
	let sum = 0;
	for (let i = 0; i < rule.at.length; i += 1) {
		const u = rule.at[i]!;
		// Nodes crowd where an arc leaves its straight and comes nearest to the other one's.
		const angle = (Math.PI / 2) * u * u;
		const along = arcRadius * Math.sin(angle);
		const across = arcRadius * Math.cos(angle);
		// asinh((S + x)/d) − asinh(x/d) in a form that stands where the arc crosses the straight's line and d is zero.
		const over = (across: number) => {
			const square = across * across + apart * apart;
			return Math.log(
				(straight + along + Math.sqrt((straight + along) ** 2 + square)) / (along + Math.sqrt(along ** 2 + square))
			);
		};
		sum +=
			rule.weight[i]! * Math.PI * u * Math.cos(angle) * (over(across - straightRadius) - over(across + straightRadius));
	}
	return 4 * arcRadius * sum;
}

/** ∫∫ over the arcs of opposite ends, coaxial. */
function oppositeArcs(straight: number, a: number, b: number, apart: number, rule: Rule): number {
	let sum = 0;
	for (let i = 0; i < rule.at.length; i += 1) {
		const u = rule.at[i]!;
		const first = (Math.PI / 2) * (1 - u * u);
		const x1 = straight + a * Math.cos(first);
		const y1 = a * Math.sin(first);
		let inner = 0;
		for (let j = 0; j < rule.at.length; j += 1) {
			const v = rule.at[j]!;
			const second = (Math.PI / 2) * (1 - v * v);
			const x = x1 + b * Math.cos(second);
			const y2 = b * Math.sin(second);
			const level = x * x + apart * apart;
			inner -=
				rule.weight[j]! *
				v *
				(Math.cos(first + second) / Math.sqrt(level + (y1 - y2) ** 2) +
					Math.cos(first - second) / Math.sqrt(level + (y1 + y2) ** 2));
		}
		sum += rule.weight[i]! * u * inner;
	}
	return 4 * a * b * Math.PI ** 2 * sum;
}

/** Mutual inductance of two coaxial racetracks of the same straight length. */
function racetracks(straight: number, a: number, b: number, apart: number): number {
	if (straight === 0) return circles(a, b, apart);
	const same = Math.hypot(a - b, apart);
	const opposite = Math.hypot(a + b, apart);
	const sides = 2 * (straights(straight, straight, same) - straights(straight, straight, opposite));
	const rule = gauss(same < 0.05 * (a + b) ? 16 : 10);
	const corners = straightsToArcs(straight, a, b, apart, rule) + straightsToArcs(straight, b, a, apart, rule);
	// Short straights bring the ends of opposite arcs together, which needs more nodes.
	const ends = oppositeArcs(straight, a, b, apart, gauss(straight > a + b ? 6 : straight > (a + b) / 4 ? 12 : 32));
	// Arcs of one end: ∫(π − |φ|)·cosφ/r dφ, of which the part with π is the full circle.
	const arc = gauss(16);
	let missing = 0;
	for (let i = 0; i < arc.at.length; i += 1) {
		const u = arc.at[i]!;
		const angle = Math.PI * u * u;
		const cos = Math.cos(angle);
		missing +=
			(arc.weight[i]! * 2 * Math.PI * u * angle * cos) / Math.sqrt(a * a + b * b - 2 * a * b * cos + apart * apart);
	}
	return (mu0 / (4 * Math.PI)) * (sides + corners + ends) + circles(a, b, apart) - (mu0 / Math.PI) * a * b * missing;
}

/** Fourfold antiderivative of ln√(x² + y²), twice in each direction. */
function logArea(x: number, y: number): number {
	const x2 = x * x;
	const y2 = y * y;
	if (x2 + y2 === 0) return 0;
	const log = ((x2 * y2) / 4 - (x2 * x2 + y2 * y2) / 24) * Math.log(x2 + y2);
	const angles = ((x2 * x * y) / 3) * Math.atan2(y, x) + ((x * y2 * y) / 3) * Math.atan2(x, y);
	return (log + angles - (25 / 24) * x2 * y2) / 2;
}

/** Twofold antiderivative of ln√(u² + b²) in u: the line to another beside it, `b` away. */
function logLine(u: number, b: number): number {
	const square = u * u + b * b;
	if (square === 0) return 0;
	return ((u * u - b * b) * Math.log(square)) / 4 - 0.75 * u * u + b * u * Math.atan2(u, b);
}

/** Cells flatter than this are treated as lines: the difference is lost in rounding before it matters. */
const flattest = 20;

/**
 * Mean of ln(distance) between the points of two equal rectangles, their middles `i` widths and `k` heights apart
 * (Maxwell; Lyle, Phil. Trans. 1914). Its exponential is their geometric mean distance.
 */
export function meanLogDistance(width: number, height: number, i: number, k: number): number {
	const long = Math.max(width, height);
	const short = Math.min(width, height);
	if (long > flattest * short) {
		const [along, beside] = width > height ? [i, k] : [k, i];
		const b = (beside * short) / long;
		// Within itself a flat rectangle counts as a line of both its sides' length.
		const length = along === 0 && beside === 0 ? long + short : long;
		return logLine(along + 1, b) - 2 * logLine(along, b) + logLine(Math.abs(along - 1), b) + Math.log(length);
	}
	const x = width / long;
	const y = height / long;
	let sum = 0;
	for (let p = -1; p <= 1; p += 1) {
		for (let q = -1; q <= 1; q += 1) {
			sum += (p === 0 ? -2 : 1) * (q === 0 ? -2 : 1) * logArea(Math.abs(i + p) * x, Math.abs(k + q) * y);
		}
	}
	return sum / (x * x * y * y) + Math.log(long);
}

/** Cells in the window, from which what infinitely many would give is drawn: the error falls as one over their number. */
const fineCells = 25;
const coarseCells = 9;
const followCells = 4;
/** Of a winding one wire deep, whose cells cannot be near-square. */
const cellsInRowMax = 160;

/** How many cells across the depth and along the traverse. */
interface Grid {
	columns: number;
	rows: number;
}

/** About so many cells, as near to squares as whole numbers come. */
function nearSquare({ windingDepthM: depth, traverseM: traverse }: Window, cells: number): Grid {
	const columns = Math.max(1, Math.min(cells, Math.round(Math.sqrt((cells * depth) / traverse))));
	const rows = Math.max(1, Math.min(cellsInRowMax, Math.round((columns * traverse) / Math.max(depth, 1e-12))));
	return { columns, rows };
}

/** Mean of all mutual inductances of the cells of a window: L of one turn spread over it. */
function meanMutualH(window: Window, { columns, rows }: Grid): number {
	const { straightM: straight, windingDepthM: depth, traverseM: traverse } = window;
	const width = depth / columns;
	const height = traverse / rows;
	const radius = (i: number) => window.endDiameterM / 2 + (i + 0.5) * width;
	const around = (i: number) => 2 * straight + 2 * Math.PI * radius(i);
	let sum = 0;
	for (let i = 0; i < columns; i += 1) {
		for (let j = i; j < columns; j += 1) {
			for (let k = 0; k < rows; k += 1) {
				const times = (i === j ? 1 : 2) * (k === 0 ? rows : 2 * (rows - k));
				const logMean = meanLogDistance(width, height, j - i, k);
				const middle = Math.hypot((j - i) * width, k * height);
				let mutual: number;
				// The same cell, or flat ones that lie upon one another: one filament at the mean distance from itself.
				if (middle < 0.1 * Math.exp(logMean)) mutual = racetracks(straight, radius(i), radius(i), Math.exp(logMean));
				else {
					// Two filaments stand for two cells but for the mean of the logarithm between their points.
					const beside = (mu0 / (2 * Math.PI)) * Math.sqrt(around(i) * around(j));
					mutual = racetracks(straight, radius(i), radius(j), k * height) - beside * (logMean - Math.log(middle));
				}
				sum += times * mutual;
			}
		}
	}
	return sum / (columns * rows) ** 2;
}

function singleTurnH(window: Window): number {
	const coarse = nearSquare(window, coarseCells);
	const fine = nearSquare(window, fineCells);
	const few = coarse.columns * coarse.rows;
	const many = fine.columns * fine.rows;
	const fineH = meanMutualH(window, fine);
	return few === many ? fineH : (many * fineH - few * meanMutualH(window, coarse)) / (many - few);
}

/** Windows lately asked for, so that moving one control leaves the other coil as it is. */
const cached = new Map<string, number>();
const cachedMax = 256;

function remembered(key: string, compute: () => number): number {
	const known = cached.get(key);
	if (known !== undefined) return known;
	const value = compute();
	if (cached.size >= cachedMax) cached.delete(cached.keys().next().value!);
	cached.set(key, value);
	return value;
}

const keyOf = (window: Window): string =>
	`${window.straightM} ${window.endDiameterM} ${window.windingDepthM} ${window.traverseM}`;

const windowRefused = (window: Window, turns: number) =>
	outside([
		['straightM', window.straightM, 0, 10],
		['endDiameterM', window.endDiameterM, 1e-6, 10],
		['windingDepthM', window.windingDepthM, 0, 10],
		['traverseM', window.traverseM, 1e-6, 10],
		['turns', turns, 0, 1e6]
	]);

/**
 * Inductance of a winding without iron. Good to 0.1 % against closed forms; what remains is how evenly the turns lie.
 *
 * @returns henries
 */
export function airInductanceH(window: Window, turns: number): Result<number> {
	const refused = windowRefused(window, turns);
	if (refused) return refused;
	if (turns === 0) return ok(0);
	return ok(turns ** 2 * remembered(keyOf(window), () => singleTurnH(window)));
}

/**
 * How many times the inductance of one window another near it has, for the same turns. A few cells tell it, of which both
 * windows have as many, so that it moves without steps.
 */
export function inductanceRatio(window: Window, near: Window): Result<number> {
	const refused = windowRefused(window, 1) ?? windowRefused(near, 1);
	if (refused) return refused;
	const grid = nearSquare(window, followCells);
	const few = (of: Window) => remembered(`${grid.columns} ${grid.rows} ${keyOf(of)}`, () => meanMutualH(of, grid));
	return ok(few(near) / few(window));
}

/** A winding and how many turns lie in it. */
export interface Wound {
	window: Window;
	turns: number;
}

/** Mean over Gauss points in the depth of two windings and over the distances between levels of them. */
function meanOver(first: Window, second: Window, n: number, mutual: (a: number, b: number, level: number) => number) {
	const { at, weight } = gauss(n);
	let sum = 0;
	at.forEach((p, i) =>
		at.forEach((q, j) => {
			const a = first.endDiameterM / 2 + p * first.windingDepthM;
			const b = second.endDiameterM / 2 + q * second.windingDepthM;
			at.forEach((u, k) =>
				at.forEach((v, l) => {
					const level = (u - 0.5) * first.traverseM - (v - 0.5) * second.traverseM;
					sum += weight[i]! * weight[j]! * weight[k]! * weight[l]! * mutual(a, b, level);
				})
			);
		})
	);
	return sum;
}

/**
 * Mutual inductance without iron of two windings one above the other on one axis, their middles `apartM` apart. Refused
 * where they would run into one another, or differ in straight length.
 */
export function mutualStackedH(first: Wound, second: Wound, apartM: number): Result<number> {
	const straight = first.window.straightM;
	const refused =
		windowRefused(first.window, first.turns) ??
		windowRefused(second.window, second.turns) ??
		outside([
			['second.straightM', second.window.straightM, straight, straight],
			['apartM', apartM, ((first.window.traverseM + second.window.traverseM) / 2) * (1 - 1e-9), 100]
		]);
	if (refused) return refused;
	const key = `${keyOf(first.window)} / ${keyOf(second.window)} / ${apartM}`;
	const compute = () =>
		meanOver(first.window, second.window, 3, (a, b, level) => racetracks(straight, a, b, apartM + level));
	return ok(first.turns * second.turns * remembered(key, compute));
}

/** Neumann's integral of two racetracks in parallel planes, their middles `beside` apart across the straights. */
function sideBySide(s: number, a: number, t: number, b: number, beside: number, apart: number): number {
	const rule = gauss(10);
	let sum = 0;
	for (const sideA of [1, -1]) {
		for (const sideB of [1, -1]) {
			const distance = Math.hypot(sideA * a - (beside + sideB * b), apart);
			if (s > 0 && t > 0) sum += sideA * sideB * straights(s, t, distance);
		}
	}
	const toArcs = (straight: number, radius: number, other: number, arc: number, offset: number): number => {
		if (straight === 0) return 0;
		let part = 0;
		for (let i = 0; i < rule.at.length; i += 1) {
			const angle = Math.PI * (rule.at[i]! - 0.5);
			const x = other / 2 + arc * Math.cos(angle);
			const y = offset + arc * Math.sin(angle);
			for (const side of [1, -1]) {
				const distance = Math.hypot(side * radius - y, apart);
				const over = Math.asinh((straight / 2 - x) / distance) + Math.asinh((straight / 2 + x) / distance);
				// The straight on the upper side runs against x, and so does an arc above its middle.
				part += rule.weight[i]! * side * Math.sin(angle) * over;
			}
		}
		return 2 * Math.PI * arc * part;
	};
	sum += toArcs(s, a, t, b, beside) + toArcs(t, b, s, a, -beside);
	for (let i = 0; i < rule.at.length; i += 1) {
		const first = Math.PI * (rule.at[i]! - 0.5);
		for (let j = 0; j < rule.at.length; j += 1) {
			const second = Math.PI * (rule.at[j]! - 0.5);
			const y = a * Math.sin(first) - beside - b * Math.sin(second);
			const same = (s - t) / 2 + a * Math.cos(first) - b * Math.cos(second);
			const opposite = (s + t) / 2 + a * Math.cos(first) + b * Math.cos(second);
			const level = y * y + apart * apart;
			const weight = rule.weight[i]! * rule.weight[j]! * 2 * a * b * Math.PI ** 2;
			sum += (weight * Math.cos(first - second)) / Math.sqrt(same * same + level);
			sum -= (weight * Math.cos(first + second)) / Math.sqrt(opposite * opposite + level);
		}
	}
	return (mu0 / (4 * Math.PI)) * sum;
}

/**
 * Mutual inductance of two windings without iron that stand side by side, their middles `spacingM` apart, by Neumann's
 * integral over two by two filaments each. Negative: the field of one goes back through the other, for currents of the
 * same sense. Refused where the windings would run into one another.
 */
export function mutualBesideH(first: Wound, second: Wound, spacingM: number): Result<number> {
	const half = ({ window }: Wound) => window.endDiameterM / 2 + window.windingDepthM;
	const refused =
		windowRefused(first.window, first.turns) ??
		windowRefused(second.window, second.turns) ??
		outside([['spacingM', spacingM, (half(first) + half(second)) * (1 - 1e-9), 100]]);
	if (refused) return refused;
	const { straightM: s } = first.window;
	const { straightM: t } = second.window;
	const key = `${keyOf(first.window)} | ${keyOf(second.window)} | ${spacingM}`;
	const compute = () =>
		meanOver(first.window, second.window, 2, (a, b, level) => sideBySide(s, a, t, b, spacingM, level));
	return ok(first.turns * second.turns * remembered(key, compute));
}

/** What iron and magnets in the core multiply the inductance by. */
export interface Core {
	key: string;
	name: string;
	/** Usual effective permeability, and the range it is met in. */
	usual: number;
	min: number;
	max: number;
}

/** Where to start; all figures from memory, editable, and replaced by one measured coil. */
export const cores: readonly Core[] = [
	{ key: 'air', name: 'no iron', usual: 1, min: 1, max: 1 },
	{ key: 'magnet-rods', name: 'magnet rods', usual: 1.45, min: 1.3, max: 1.6 },
	{ key: 'wide-screws', name: 'screws in a wide coil', usual: 1.8, min: 1.6, max: 2 },
	{ key: 'slugs-screws', name: 'steel slugs or screws', usual: 2.4, min: 2, max: 2.8 }
];

/** Relative half-widths of what is claimed for a predicted inductance. */
export const inductanceClaims = { air: 0.02, cored: 0.25, calibrated: 0.05 } as const;

/** Effective permeability from a coil whose inductance was measured and whose winding is known. */
export function permeabilityFrom(measuredH: number, airH: number): Result<number> {
	const refused = outside([
		['airH', airH, 1e-9, 1e4],
		['measuredH', measuredH, 0.5 * airH, 20 * airH]
	]);
	return refused ?? ok(measuredH / airH);
}
