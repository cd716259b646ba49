/**
 * How figures are written on screen and paper. The same text comes out on the server and in every browser: nothing here
 * asks for the reader's own locale, so a page does not change under the eye when the script starts.
 */

const months = ['Jan', 'Feb', 'Mar', 'Apr', 'May', 'Jun', 'Jul', 'Aug', 'Sep', 'Oct', 'Nov', 'Dec'];

/** "5,320"; a negative number gets a true minus sign. */
export function wholeText(value: number): string {
	const digits = String(Math.abs(Math.round(value))).replace(/\B(?=(\d{3})+$)/g, ',');
	return Math.round(value) < 0 ? `−${digits}` : digits;
}

/** "1 turn", "5,320 turns". */
export function turnsText(value: number): string {
	return `${wholeText(value)} ${Math.abs(Math.round(value)) === 1 ? 'turn' : 'turns'}`;
}

/** "+2", "−1", "0". */
export function offText(value: number): string {
	return Math.round(value) > 0 ? `+${wholeText(value)}` : wholeText(value);
}

/** A length of time as minutes and seconds, "11:52", or "1:02:11" from an hour on. */
export function durationText(ms: number): string {
	const seconds = Math.round(Math.max(0, ms) / 1000);
	const two = (value: number) => String(value).padStart(2, '0');
	const minutes = Math.floor(seconds / 60) % 60;
	const hours = Math.floor(seconds / 3600);
	return hours > 0 ? `${hours}:${two(minutes)}:${two(seconds % 60)}` : `${minutes}:${two(seconds % 60)}`;
}

/** An age for people: "just now", "12 s ago", "4 min ago", "3 h ago", "2 days ago". */
export function agoText(ms: number): string {
	const seconds = Math.floor(ms / 1000);
	if (seconds < 2) return 'just now';
	if (seconds < 120) return `${seconds} s ago`;
	const minutes = Math.floor(seconds / 60);
	if (minutes < 120) return `${minutes} min ago`;
	const hours = Math.floor(minutes / 60);
	return hours < 48 ? `${hours} h ago` : `${Math.floor(hours / 24)} days ago`;
}

export interface WallTime {
	year: number;
	/** 1 to 12. */
	month: number;
	day: number;
	hour: number;
	minute: number;
	second: number;
}

const clocks = new Map<string, Intl.DateTimeFormat>();

/**
 * An instant on the clock of a time zone.
 *
 * @param timeZone an IANA name such as `Europe/London`
 */
export function wallTime(at: Date | number, timeZone: string): WallTime {
	let clock = clocks.get(timeZone);
	if (!clock) {
		clock = new Intl.DateTimeFormat('en-GB', {
			timeZone,
			hourCycle: 'h23',
			year: 'numeric',
			month: 'numeric',
			day: 'numeric',
			hour: 'numeric',
			minute: 'numeric',
			second: 'numeric'
		});
		clocks.set(timeZone, clock);
	}
	const parts = { year: 0, month: 0, day: 0, hour: 0, minute: 0, second: 0 };
	for (const { type, value } of clock.formatToParts(at)) {
		if (type in parts) parts[type as keyof typeof parts] = Number(value);
	}
	return parts;
}

const two = (value: number) => String(value).padStart(2, '0');

/** "2 Dec 2026 10:41" on the workshop's clock. */
export function whenText(at: Date | number, timeZone: string): string {
	const { year, month, day, hour, minute } = wallTime(at, timeZone);
	return `${day} ${months[month - 1]} ${year} ${two(hour)}:${two(minute)}`;
}

/** The same without the year where that is `thisYear`: "2 Dec 10:41". */
export function recentText(at: Date | number, timeZone: string, thisYear: number): string {
	const { year, month, day, hour, minute } = wallTime(at, timeZone);
	return `${day} ${months[month - 1]}${year === thisYear ? '' : ` ${year}`} ${two(hour)}:${two(minute)}`;
}

/** "10:41:09" on the workshop's clock. */
export function clockText(at: Date | number, timeZone: string): string {
	const { hour, minute, second } = wallTime(at, timeZone);
	return `${two(hour)}:${two(minute)}:${two(second)}`;
}

/** "2026-12-02 10:41:09" on the workshop's clock, as spreadsheets read a time. */
export function sheetTimeText(at: Date | number, timeZone: string): string {
	const { year, month, day, hour, minute, second } = wallTime(at, timeZone);
	return `${year}-${two(month)}-${two(day)} ${two(hour)}:${two(minute)}:${two(second)}`;
}
