import { defineConfig } from '@playwright/test';

/** Browser tests against the built program, in Debian's Chromium: each test starts its own server (tests/e2e/server.ts). */
export default defineConfig({
	testDir: 'tests/e2e',
	globalSetup: './tests/e2e/global-setup.ts',
	// A coil is wound in each; several browsers at once on a small machine would only wait for each other.
	workers: 1,
	forbidOnly: true,
	retries: 0,
	timeout: 120_000,
	expect: { timeout: 20_000 },
	reporter: [['list']],
	use: {
		browserName: 'chromium',
		actionTimeout: 20_000,
		launchOptions: {
			executablePath: '/usr/bin/chromium',
			args: [
				'--no-sandbox',
				'--disable-gpu',
				'--disable-quic',
				'--no-first-run',
				'--disable-background-networking',
				'--disable-component-update',
				'--disable-sync',
				'--autoplay-policy=user-gesture-required'
			]
		},
		screenshot: 'only-on-failure',
		trace: 'retain-on-failure'
	}
});
