import { ensureBuilt } from '../../src/commands/build.ts';
import { provideTestEnv } from '../../src/lib/server/env.ts';
import { testCluster } from '../db/harness.ts';

/** Once for all browser tests: the build, and a cluster with a migrated database to copy. */
export default async function setup(): Promise<() => Promise<void>> {
	await ensureBuilt();
	const { url, template, remove } = await testCluster();
	provideTestEnv(url, template);
	return remove;
}
