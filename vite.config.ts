import { sveltekit } from '@sveltejs/kit/vite';
import tailwindcss from '@tailwindcss/vite';
import { defineConfig } from 'vitest/config';
import { linkUpgrade } from './src/commands/link-upgrade.ts';
import { expectedMigrations } from './src/lib/server/db/migrate.ts';

export default defineConfig({
	plugins: [tailwindcss(), sveltekit(), linkUpgrade()],
	// The bundle carries no migrations, but its health must know which the database needs.
	define: { __MIGRATION_NAMES__: JSON.stringify(expectedMigrations()) },
	test: {
		projects: [
			{
				extends: true,
				test: {
					name: 'unit',
					environment: 'node',
					include: ['{src,simulator,firmware-protocol}/**/*.test.ts', 'tests/{rules,bench}/**/*.test.ts']
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
					// Kills servers and databases: one file at a time, against the build.
					name: 'faults',
					environment: 'node',
					include: ['tests/faults/**/*.test.ts'],
					globalSetup: ['tests/db/global-setup.ts'],
					fileParallelism: false
				}
			}
		]
	}
});
