import type { TestProject } from 'vitest/node';
import { throwawayCluster } from '../../src/commands/cluster.ts';
import { testEnv } from '../../src/lib/server/env.ts';
import { dropTemplate, makeTemplate } from './harness.ts';

declare module 'vitest' {
	export interface ProvidedContext {
		/** A database of the test cluster, for making others beside it. */
		clusterUrl: string;
		/** The migrated database each test file gets a copy of. */
		template: string;
	}
}

export default async function setup(project: TestProject): Promise<() => Promise<void>> {
	const given = testEnv().databaseUrl;
	const own = given === null ? await throwawayCluster() : null;
	const url = given ?? own?.url ?? '';
	const template = await makeTemplate(url);
	project.provide('clusterUrl', url);
	project.provide('template', template);
	return async () => {
		if (own === null) await dropTemplate(url, template);
		else await own.remove();
	};
}
