/**
 * Propagation of uncertainty by first derivatives (JCGM 100, 5.1.2), for figures that have no closed form.
 */

export interface Input<Name extends string = string> {
	name: Name;
	value: number;
	/** Standard uncertainty, in the unit of the value. */
	uncertainty: number;
}

export interface Part<Name extends string = string> {
	name: Name;
	/** What this input alone adds, in the unit of the figure. */
	uncertainty: number;
}

export interface Uncertain<Name extends string = string> {
	value: number;
	/** Standard uncertainty. */
	uncertainty: number;
	/** Largest first; inputs that add nothing are left out. */
	parts: Part<Name>[];
}

/**
 * Figures and how sure they are, for inputs that do not depend on one another. Derivatives are differences over one
 * standard uncertainty each way, so that gentle curvature is taken in. A figure may be null where there is none (no peak):
 * then the other side alone gives the derivative, or the figure itself is null.
 *
 * @param figures all figures at one set of values, in the order of the inputs
 */
export function propagate<Name extends string, Figure extends string>(
	inputs: readonly Input<Name>[],
	figures: (values: readonly number[]) => Readonly<Record<Figure, number | null>>
): Record<Figure, Uncertain<Name> | null> {
	const centre = inputs.map((input) => input.value);
	const at = figures(centre);
	const names = Object.keys(at) as Figure[];
	const beside = inputs.map((input, i) => {
		if (input.uncertainty === 0) return null;
		const moved = (sign: number) => figures(centre.with(i, input.value + sign * input.uncertainty));
		return { up: moved(1), down: moved(-1) };
	});
	const answer = (name: Figure): Uncertain<Name> | null => {
		const value = at[name];
		if (value === null) return null;
		const parts: Part<Name>[] = [];
		inputs.forEach((input, i) => {
			const sides = beside[i];
			if (!sides) return;
			const up = sides.up[name];
			const down = sides.down[name];
			const change = up === null || down === null ? (up ?? down ?? value) - value : (up - down) / 2;
			if (change !== 0) parts.push({ name: input.name, uncertainty: Math.abs(change) });
		});
		parts.sort((a, b) => b.uncertainty - a.uncertainty);
		return { value, uncertainty: Math.hypot(...parts.map((part) => part.uncertainty)), parts };
	};
	return Object.fromEntries(names.map((name) => [name, answer(name)])) as Record<Figure, Uncertain<Name> | null>;
}
