/** Numbers in [0, 1) from a seed: the same seed gives the same numbers on every machine. */
export type Random = () => number;

/**
 * The generator known as sfc32: four words of state, fast, and good enough for hands that shake. Its words come from
 * the seed and the names by FNV-1a, so that each part of a simulation draws from a stream of its own and adding a draw
 * in one part does not move the numbers of another.
 */
export function randomFrom(seed: number, ...names: string[]): Random {
	let a = hashed(`a${seed}/${names.join('/')}`);
	let b = hashed(`b${seed}/${names.join('/')}`);
	let c = hashed(`c${seed}/${names.join('/')}`);
	let counter = 1;
	const next = () => {
		const sum = (((a + b) | 0) + counter) | 0;
		counter = (counter + 1) | 0;
		a = b ^ (b >>> 9);
		b = (c + (c << 3)) | 0;
		c = (c << 21) | (c >>> 11);
		c = (c + sum) | 0;
		return (sum >>> 0) / 2 ** 32;
	};
	// The words of a hash are correlated; a few rounds mix them.
	for (let round = 0; round < 12; round++) next();
	return next;
}

function hashed(text: string): number {
	let hash = 0x811c9dc5;
	for (let at = 0; at < text.length; at++) hash = Math.imul(hash ^ text.charCodeAt(at), 0x01000193);
	return hash | 0;
}

/** Evenly between two bounds. */
export function between(random: Random, least: number, most: number): number {
	return least + (most - least) * random();
}

/** A whole number between two bounds, both included. */
export function wholeBetween(random: Random, least: number, most: number): number {
	return least + Math.floor(random() * (most - least + 1));
}

/** Eight hex digits, upper case: a boot id. */
export function bootIdFrom(random: Random): string {
	return Math.floor(random() * 2 ** 32)
		.toString(16)
		.toUpperCase()
		.padStart(8, '0');
}
