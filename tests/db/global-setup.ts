import type { TestProject } from 'vitest/node';
import { testCluster } from './harness.ts';

declare module 'vitest' {
	export interface ProvidedContext {
		/** A database of the test cluster, for making others beside it. */
		clusterUrl: string;
		/** The migrated database each test file gets a copy of. */
		template: string;
	}
}

export default async function setup(project: TestProject): Promise<() => Promise<void>> {
	const { url, template, remove } = await testCluster();
	project.provide('clusterUrl', url);
	project.provide('template', template);
	return remove;
}
