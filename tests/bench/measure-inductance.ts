import { genericBobbins } from '../../src/lib/coil/bobbins.ts';
import { airInductanceH, mutualBesideH, type Window, type Wound } from '../../src/lib/coil/inductance.ts';
import { predictSpec } from '../../src/lib/spec/model.ts';
import { startingSpec } from '../../src/lib/spec/start.ts';
import type { Options } from './options.ts';
import type { Report } from './report.ts';
import type { Ground } from './workshop.ts';

/** A slider of a two-coil pickup is followed when its inductance takes no longer. */
const aimMs = 20;
const roundsUsual = 200;
/** Parts of one filament in the sum that is written first: what a plain double sum takes per pair of filaments. */
const segments = 200;

/**
 * What a slider waits for: inductance of a pickup of two coils, and its whole prediction with all uncertainties. Every
 * round is at other turns, so that nothing is remembered from the one before. The reference is Neumann's integral of one
 * pair of filaments as a plain double sum, in the same run.
 */
export async function measureInductance(_ground: Ground, report: Report, { quick }: Options): Promise<void> {
	const rounds = quick ? 20 : roundsUsual;
	const took = { inductance: [] as number[], prediction: [] as number[], plain: [] as number[] };
	for (let round = 0; round < rounds; round += 1) {
		const turns = 4000 + 7 * round;
		took.inductance.push(timed(() => pairH(turns)));
		took.prediction.push(timed(() => spec(turns)));
		took.plain.push(timed(() => plainPairH(0.004 + 1e-6 * round, 0.0066, 0.0031)));
	}
	report.inductance({ ...took, aimMs, rounds, pairs: segments ** 2 });
	report.say(`inductance: ${rounds} rounds`);
}

function timed(work: () => number): number {
	const from = performance.now();
	const value = work();
	const ms = performance.now() - from;
	// A value nobody looks at may not be computed at all.
	if (!(Number.isFinite(value) && value > 0)) throw new Error(`the computation gave ${value}`);
	return ms;
}

const { bobbin } = genericBobbins.find((generic) => generic.key === 'two-coil')!;
const growthM = 1.02e-6;

function pairH(turns: number): number {
	const wound = [turns, turns - 83].map((count): Wound => {
		const window: Window = {
			straightM: bobbin.straightM,
			endDiameterM: bobbin.endDiameterM,
			traverseM: bobbin.traverseM,
			windingDepthM: growthM * count
		};
		return { window, turns: count };
	});
	const [first, second] = wound as [Wound, Wound];
	const one = airInductanceH(first.window, first.turns);
	const other = airInductanceH(second.window, second.turns);
	const mutual = mutualBesideH(first, second, 0.018);
	if (!one.ok || !other.ok || !mutual.ok) throw new Error('a sensible coil was refused');
	return one.value + other.value - 2 * mutual.value;
}

function spec(turns: number): number {
	const content = startingSpec('two-coils', 'Measured');
	content.coils.forEach((coil, i) => (coil.turns = turns - 83 * i));
	const predicted = predictSpec(content);
	if (!predicted.ok) throw new Error(`${predicted.field} was refused`);
	return predicted.value.figures.inductanceH.value;
}

/** Two coaxial racetracks cut into straight parts: Σ Σ dl·dl′/r over every pair of parts. */
function plainPairH(a: number, b: number, apart: number): number {
	const first = racetrack(a);
	const second = racetrack(b);
	let sum = 0;
	for (const p of first) {
		for (const q of second) {
			sum += (p.dx * q.dx + p.dy * q.dy) / Math.hypot(p.x - q.x, p.y - q.y, apart);
		}
	}
	return 1e-7 * sum;
}

function racetrack(radius: number): { x: number; y: number; dx: number; dy: number }[] {
	const half = bobbin.straightM / 2;
	const around = 2 * bobbin.straightM + 2 * Math.PI * radius;
	const at = (s: number): [number, number] => {
		const u = ((s % around) + around) % around;
		if (u < 2 * half) return [u - half, -radius];
		const right = u - 2 * half;
		if (right < Math.PI * radius) {
			const angle = right / radius - Math.PI / 2;
			return [half + radius * Math.cos(angle), radius * Math.sin(angle)];
		}
		const top = right - Math.PI * radius;
		if (top < 2 * half) return [half - top, radius];
		const angle = (top - 2 * half) / radius + Math.PI / 2;
		return [-half + radius * Math.cos(angle), radius * Math.sin(angle)];
	};
	return Array.from({ length: segments }, (_, i) => {
		const [x1, y1] = at((i * around) / segments);
		const [x2, y2] = at(((i + 1) * around) / segments);
		return { x: (x1 + x2) / 2, y: (y1 + y2) / 2, dx: x2 - x1, dy: y2 - y1 };
	});
}
