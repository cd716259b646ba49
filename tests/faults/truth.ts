import { expect } from 'vitest';
import type { WinderResult } from '../../simulator/run.ts';
import type { TestServer, TestWinder } from '../e2e/server.ts';
import { winderRows } from './rows.ts';

/** The rows of a winder hold each event once, and the totals it counted. */
export async function expectTruth(server: TestServer, winder: TestWinder, truth: WinderResult): Promise<void> {
	expect(truth.coilsReached, 'the coil was wound').toBe(1);
	expect(truth.eventsWaiting, 'no event is left to send').toBe(0);
	expect(truth.boots).toHaveLength(1);
	const boot = truth.boots[0]!;
	const rows = await winderRows(server, winder);
	const stored = rows.events.map(({ n, e, k, f, v }) => ({ n, e, k, f, v }));
	const told = boot.events.map(({ n, e, k, f, v }) => ({ n, e, k, f, v }));
	expect(stored, 'each event once, as it was told').toEqual(told);
	const cursor = rows.boots.find((row) => row.boot === boot.boot);
	expect({ f: cursor?.forward, v: cursor?.reverse }).toEqual({ f: boot.forward, v: boot.reverse });
	expect(rows.facts.map((fact) => fact.kind)).not.toContain('restarted');
}
