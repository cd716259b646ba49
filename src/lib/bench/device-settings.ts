import { z } from 'zod';
import { pxPerMmRange } from './sizes.ts';

/** What this device, and nobody else's, has been told: its screen and its sound. */
const schema = z.object({
	/** Pixels per mm as measured with a card; null: not yet. */
	pxPerMm: z.number().min(pxPerMmRange.min).max(pxPerMmRange.max).nullable().catch(null),
	/** Where the maker stands; null: as usual for such a screen. */
	standM: z.number().min(0.3).max(5).nullable().catch(null),
	volume: z.number().min(0).max(1).catch(0.7),
	countTick: z.boolean().catch(true)
});
export type DeviceSettings = z.infer<typeof schema>;

export const usualSettings: DeviceSettings = { pxPerMm: null, standM: null, volume: 0.7, countTick: true };

const key = 'turnstead.bench';

/** What is stored, field by field: a damaged one falls back to the usual. */
export function readSettings(text: string | null): DeviceSettings {
	if (text === null) return usualSettings;
	try {
		const read = schema.safeParse(JSON.parse(text));
		return read.success ? read.data : usualSettings;
	} catch {
		return usualSettings;
	}
}

/** A browser that forbids storage keeps the settings for this page only. */
export function loadSettings(): DeviceSettings {
	try {
		return readSettings(localStorage.getItem(key));
	} catch {
		return usualSettings;
	}
}

export function saveSettings(settings: DeviceSettings): void {
	try {
		localStorage.setItem(key, JSON.stringify(settings));
	} catch {
		// Kept for this page only.
	}
}
