import { execFile } from 'node:child_process';
import { readdirSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { promisify } from 'node:util';

/** Compilers over the core, by the rules it promises to compile under. A missing one throws: what did not run has not passed. */

export const coreFolder = fileURLToPath(new URL('../../firmware-protocol/core', import.meta.url));
export const coreSources = readdirSync(coreFolder)
	.filter((name) => name.endsWith('.c'))
	.map((name) => join(coreFolder, name));
export const hostSource = (name: string) => join(coreFolder, 'host', name);

export const strict = ['-std=c99', '-Wall', '-Wextra', '-Wpedantic', '-Werror', '-Wconversion'];
export const sanitizers = ['-g', '-O1', '-fsanitize=address,undefined', '-fno-sanitize-recover=all'];

/** Runs a tool to its end; throws with what it said when it fails. */
export async function tool(name: string, args: string[]): Promise<string> {
	const { stdout, stderr } = await promisify(execFile)(name, args, { encoding: 'utf8', maxBuffer: 64 * 1024 * 1024 });
	return stdout + stderr;
}
