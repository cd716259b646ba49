import { describe, expect, it } from 'vitest';
import { debounceMs, heldMs, Pedal } from './pedal.ts';

describe('one key or pedal', () => {
	it.each([' ', 'Enter', 'PageDown'])('%j acts when it is let go', (key) => {
		const pedal = new Pedal();
		pedal.down(key, false, 1_000);
		expect(pedal.up(key, 1_100)).toBe('pressed');
	});

	it('held long it is the other meaning', () => {
		const pedal = new Pedal();
		pedal.down(' ', false, 1_000);
		pedal.down(' ', true, 1_500);
		expect(pedal.up(' ', 1_000 + heldMs)).toBe('held');
	});

	it('a bouncing pedal is one press', () => {
		const pedal = new Pedal();
		pedal.down(' ', false, 1_000);
		expect(pedal.up(' ', 1_050)).toBe('pressed');
		pedal.down(' ', false, 1_070);
		expect(pedal.up(' ', 1_090)).toBeNull();
		pedal.down(' ', false, 1_060 + debounceMs);
		expect(pedal.up(' ', 1_080 + debounceMs)).toBe('pressed');
	});

	it('a repeating key is down once, and a key of the wrong name never', () => {
		const pedal = new Pedal();
		pedal.down(' ', true, 1_000);
		expect(pedal.up(' ', 1_100)).toBeNull();
		pedal.down('a', false, 2_000);
		expect(pedal.up('a', 2_100)).toBeNull();
	});

	it('two keys at once are the first one', () => {
		const pedal = new Pedal();
		pedal.down(' ', false, 1_000);
		pedal.down('Enter', false, 1_010);
		expect(pedal.up('Enter', 1_050)).toBeNull();
		expect(pedal.up(' ', 1_060)).toBe('pressed');
	});

	it('a key let go in another window means nothing', () => {
		const pedal = new Pedal();
		pedal.down(' ', false, 1_000);
		pedal.cancel();
		expect(pedal.up(' ', 3_000)).toBeNull();
	});

	it('a touch and a press share the debounce', () => {
		const pedal = new Pedal();
		expect(pedal.allows(1_000)).toBe(true);
		pedal.down(' ', false, 1_050);
		expect(pedal.up(' ', 1_100)).toBeNull();
	});
});
