import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import type { TestProject } from 'vitest/node';
import { coreSources, hostSource, sanitizers, strict, tool } from './toolchain.ts';

declare module 'vitest' {
	export interface ProvidedContext {
		/** Programs made of the core: `winder-32`, `winder-256`, `codec`, all under the sanitizers. */
		firmware: string;
	}
}

export default async function setup(project: TestProject): Promise<() => void> {
	const folder = mkdtempSync(join(tmpdir(), 'turnstead-firmware-'));
	const clean = () => rmSync(folder, { recursive: true, force: true });
	const make = (name: string, source: string, lines: number) =>
		tool('gcc', [
			...strict,
			...sanitizers,
			`-DTURNLINE_RING_LINES=${lines}`,
			...coreSources,
			hostSource(source),
			'-o',
			join(folder, name)
		]);
	try {
		await Promise.all([
			make('winder-32', 'winder.c', 32),
			make('winder-256', 'winder.c', 256),
			make('codec', 'codec.c', 32)
		]);
	} catch (error) {
		clean();
		throw error;
	}
	project.provide('firmware', folder);
	return clean;
}
