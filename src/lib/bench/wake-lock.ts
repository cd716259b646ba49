/** 'held': the screen stays on. 'unavailable': it may sleep, and the maker is told so. */
export type WakeLockState = 'held' | 'unavailable';

/**
 * Keeps the screen on while the page is shown, where the browser allows it: over a secure connection, and with battery
 * enough. The browser lets go whenever the page is hidden, so it is asked again each time the page comes back.
 *
 * @returns ends it
 */
export function keepAwake(tell: (state: WakeLockState) => void): () => void {
	let sentinel: WakeLockSentinel | null = null;
	let ended = false;

	const ask = async () => {
		if (ended || document.visibilityState !== 'visible') return;
		if (!('wakeLock' in navigator)) return tell('unavailable');
		try {
			sentinel = await navigator.wakeLock.request('screen');
			if (ended) void sentinel.release();
			else tell('held');
			sentinel.addEventListener('release', () => {
				if (!ended && document.visibilityState === 'visible') tell('unavailable');
			});
		} catch {
			tell('unavailable');
		}
	};
	const onVisible = () => void ask();
	document.addEventListener('visibilitychange', onVisible);
	void ask();
	return () => {
		ended = true;
		document.removeEventListener('visibilitychange', onVisible);
		void sentinel?.release();
	};
}
