import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { parseDeviceLine } from '../src/lib/turnline/index.ts';
import { Device, ordinaryDevice, type Retained } from './device.ts';
import { readMemory, writeMemory } from './memory.ts';
import { randomFrom } from './random.ts';
import type { SimulatedWinder } from './winder.ts';

let folder: string;
beforeEach(() => (folder = mkdtempSync(join(tmpdir(), 'turnstead-memory-'))));
afterEach(() => rmSync(folder, { recursive: true, force: true }));

const held: Retained = { b: '5C0E91A7', f: 1200, v: 3 };
const winder = (id: string, memory: Retained | null) => ({ traits: { id }, device: { memory } }) as SimulatedWinder;

describe('memory that survives', () => {
	it('is found again by the next start', () => {
		const file = join(folder, 'memory.json');
		writeMemory(file, [winder('a', held), winder('b', null)], { c: held });
		expect(readMemory(file)).toEqual({ a: held, c: held });
	});

	it.each(['', '{"a":', '[]', '{"a":{"b":"xyz","f":1,"v":0}}', '{"a":{"b":"5C0E91A7","f":-1,"v":0}}'])(
		'of another shape is no memory: %s',
		(text) => {
			const file = join(folder, 'memory.json');
			writeFileSync(file, text);
			expect(readMemory(file)).toEqual({});
			expect(readMemory(join(folder, 'none'))).toEqual({});
		}
	);

	it('is told in the birth line', () => {
		const traits = { ...ordinaryDevice, retains: true };
		const device = new Device(traits, randomFrom(1, 'boot'), 0, {}, held);
		device.linkUp(0);
		const parsed = parseDeviceLine(device.take(0)[0]!);
		expect(parsed).toMatchObject({ ok: true, line: { verb: 'HI', pb: '5C0E91A7', pf: 1200, pv: 3, f: 0 } });
		expect(device.memory).toEqual(held);
	});
});
