import { defineConfig, mergeConfig } from 'vitest/config';
import viteConfig from './vite.config.ts';

/** Apart from vite.config.ts, so that a build needs no test runner and a change here makes no new build. */
export default mergeConfig(
	viteConfig,
	defineConfig({
		test: {
			// A limit for what hangs. On a small machine that does other things too, five seconds are soon over.
			testTimeout: 60_000,
			hookTimeout: 60_000,
			projects: [
				{
					extends: true,
					test: {
						name: 'unit',
						environment: 'node',
						include: ['{src,simulator,firmware-protocol}/**/*.test.ts', 'tests/{rules,bench,serial}/**/*.test.ts']
					}
				},
				{
					extends: true,
					test: {
						// Against independent programs of the system: units, ngspice, python3-uncertainties.
						name: 'reference',
						environment: 'node',
						include: ['tests/reference/**/*.test.ts'],
						testTimeout: 60_000
					}
				},
				{
					extends: true,
					test: {
						// The C core, compiled and driven; needs gcc, clang and avr-gcc.
						name: 'firmware',
						environment: 'node',
						include: ['tests/firmware/**/*.test.ts'],
						globalSetup: ['tests/firmware/global-setup.ts']
					}
				},
				{
					extends: true,
					test: {
						name: 'database',
						environment: 'node',
						include: ['tests/db/**/*.test.ts'],
						globalSetup: ['tests/db/global-setup.ts']
					}
				},
				{
					extends: true,
					test: {
						// Kills servers, databases and bridges of its own, against the build; mostly it waits.
						name: 'faults',
						environment: 'node',
						include: ['tests/faults/**/*.test.ts'],
						globalSetup: ['tests/db/global-setup.ts'],
						maxWorkers: 2
					}
				}
			]
		}
	})
);
