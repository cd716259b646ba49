import { readFileSync, renameSync, writeFileSync } from 'node:fs';
import type { Retained } from './device.ts';
import type { SimulatedWinder } from './winder.ts';

/** Memory that survives, as a file: by winder, the totals its firmware would find when the supply comes back. */
export type MemoryFile = Record<string, Retained>;

/** Nothing is known of a winder whose file is missing, torn or of another shape: it starts as if it were new. */
export function readMemory(file: string): MemoryFile {
	try {
		const found: unknown = JSON.parse(readFileSync(file, 'utf8'));
		if (typeof found !== 'object' || found === null) return {};
		return Object.fromEntries(
			Object.entries(found).filter((entry): entry is [string, Retained] => isRetained(entry[1]))
		);
	} catch {
		return {};
	}
}

function isRetained(value: unknown): value is Retained {
	const { b, f, v } = (value ?? {}) as Partial<Retained>;
	const count = (n: unknown) => Number.isInteger(n) && (n as number) >= 0;
	return typeof b === 'string' && /^[0-9A-F]{8}$/.test(b) && count(f) && count(v);
}

/** Written aside and renamed: a reader finds the old or the new, never half of one. */
export function writeMemory(file: string, winders: readonly SimulatedWinder[], before: MemoryFile): void {
	const held: MemoryFile = { ...before };
	for (const { traits, device } of winders) if (device.memory) held[traits.id] = device.memory;
	writeFileSync(`${file}.new`, JSON.stringify(held), { mode: 0o600 });
	renameSync(`${file}.new`, file);
}
