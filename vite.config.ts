import { sveltekit } from '@sveltejs/kit/vite';
import tailwindcss from '@tailwindcss/vite';
import { defineConfig } from 'vite';
import { linkUpgrade } from './src/commands/link-upgrade.ts';
import { expectedMigrations } from './src/lib/server/db/migrate.ts';

export default defineConfig({
	plugins: [tailwindcss(), sveltekit(), linkUpgrade()],
	// The bundle carries no migrations, but its health must know which the database needs.
	define: { __MIGRATION_NAMES__: JSON.stringify(expectedMigrations()) }
});
