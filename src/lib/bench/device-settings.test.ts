import { describe, expect, it } from 'vitest';
import { readSettings, usualSettings } from './device-settings.ts';

describe('settings of this device', () => {
	it('what was stored is read', () => {
		const settings = { pxPerMm: 5.87, standM: 1, volume: 0.3, countTick: false };
		expect(readSettings(JSON.stringify(settings))).toEqual(settings);
	});

	it('nothing, noise and a damaged field fall back to the usual', () => {
		expect(readSettings(null)).toEqual(usualSettings);
		expect(readSettings('{')).toEqual(usualSettings);
		expect(readSettings('[]')).toEqual(usualSettings);
		expect(readSettings('{"pxPerMm":900,"standM":2,"volume":"loud","countTick":true}')).toEqual({
			...usualSettings,
			standM: 2
		});
	});
});
