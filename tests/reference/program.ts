import { execFileSync } from 'node:child_process';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';

/** Runs an independent program and gives what it wrote. A missing one throws: a check that did not run has not passed. */
export function ask(program: string, args: string[], input = ''): string {
	return execFileSync(program, args, { input, encoding: 'utf8', stdio: ['pipe', 'pipe', 'ignore'], timeout: 60_000 });
}

/** One value by GNU units: how many of a unit an expression is. */
export const inUnits = (expression: string, unit: string): number =>
	Number(ask('units', ['--terse', '--output-format', '%.14g', expression, unit]).trim());

/** Runs a circuit in ngspice and gives the numbers it printed as "name = value", by name. */
export function spice(netlist: string): Record<string, number> {
	const folder = mkdtempSync(join(tmpdir(), 'turnstead-spice-'));
	try {
		const file = join(folder, 'circuit.cir');
		writeFileSync(file, netlist);
		const printed = ask('ngspice', ['-b', file]);
		return Object.fromEntries(
			[...printed.matchAll(/^(\w+)\s*=\s*(-?[\d.]+(?:e[-+]?\d+)?)/gim)].map((found) => [found[1]!, Number(found[2])])
		);
	} finally {
		rmSync(folder, { recursive: true, force: true });
	}
}
