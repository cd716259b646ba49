import { beatCame, madeBeforeMs, type Arrivals } from './arrival.ts';
import { loadSettings, saveSettings, usualSettings, type DeviceSettings } from './device-settings.ts';
import { Feed } from './feed.ts';
import { Pedal } from './pedal.ts';
import {
	missedCues,
	present,
	quietOptions,
	type Act,
	type Asking,
	type BenchModel,
	type BenchTap,
	type PresentOptions
} from './present.ts';
import { countMarkPassed } from './rhythm.ts';
import { sizesFor, type Sizes } from './sizes.ts';
import { Player } from './sound.ts';
import { TapQueue, type WaitingTap } from './tap-queue.ts';
import { keepAwake } from './wake-lock.ts';
import { linkStateOf } from '../winding/link.ts';
import type { LiveView, RunView, TapKind } from '../winding/types.ts';

/** Ages are read to a tenth of a second. */
const tickMs = 100;
/** A timer this late means the tablet slept: what is shown is not of now. */
const sleptMs = 3_000;
const refusalShownMs = 8_000;
const caughtUpShownMs = 8_000;
const missedShownMs = 20_000;
/** The test has been heard out by then, and the tap that played it has done what its button says. */
const soundAskedAfterMs = 1_000;

export interface BenchStart {
	view: LiveView;
	/** Monotonic ms at which the view came with the page. */
	receivedAtMs: number;
	memberId: string;
	timeZone: string;
}

type SoundChoice = 'unasked' | 'on' | 'screen-only';

/** The bench of one winder in the browser: its newest state, its sound and its taps. */
export class Bench {
	readonly winderId: string;
	readonly #memberId: string;
	readonly #timeZone: string;

	view = $state.raw<LiveView>() as LiveView;
	settings = $state.raw<DeviceSettings>(usualSettings);
	sheetOpen = $state(false);
	/** Another tab is in front, or another program. */
	hidden = $state(false);

	#nowMs = $state(0);
	#receivedAtMs = $state(0);
	#madeBeforeMs = $state(0);
	#arrivals = $state.raw<Arrivals | null>(null);
	#heardAtMs = $state(0);
	#streaming = $state(true);
	#unsure = $state(false);
	#access = $state<PresentOptions['access']>('ok');
	#waiting = $state.raw<readonly WaitingTap[]>([]);
	#refusal = $state.raw<{ text: string; untilMs: number } | null>(null);
	#asking = $state<Asking>(null);
	#entered = $state<number | null>(null);
	#keptSeenAtMs = $state<number | null>(null);
	#caughtUpUntilMs = $state(0);
	#missed = $state.raw<{ texts: string[]; untilMs: number }>({ texts: [], untilMs: 0 });
	#awake = $state(true);
	#soundChoice = $state<SoundChoice>('unasked');
	#soundAwake = $state(false);
	/** Monotonic ms at which the test was played and its question not yet answered. */
	#soundTestedAtMs = $state<number | null>(null);
	#width = $state(1180);
	#height = $state(820);

	#feed: Feed | null = null;
	#queue: TapQueue | null = null;
	#player: Player | null = null;
	#pedal = new Pedal();
	#behind = false;
	#hiddenRun: RunView | null = null;
	#ticksAtMs = { monotonic: 0, wall: 0 };

	readonly model: BenchModel = $derived(present(this.view, this.#nowMs, this.#receivedAtMs, this.#options()));
	readonly sizes: Sizes = $derived(
		sizesFor({
			widthPx: this.#width,
			heightPx: this.#height,
			pxPerMm: this.settings.pxPerMm,
			standM: this.settings.standM,
			digits: this.model.digits
		})
	);

	constructor(start: BenchStart) {
		this.winderId = start.view.winderId;
		this.#memberId = start.memberId;
		this.#timeZone = start.timeZone;
		this.view = start.view;
		this.#receivedAtMs = this.#nowMs = this.#heardAtMs = start.receivedAtMs;
		if (start.view.run?.state === 'kept') this.#keptSeenAtMs = start.receivedAtMs;
	}

	get screenOnly(): boolean {
		return this.#soundChoice === 'screen-only';
	}
	get mayFallAsleep(): boolean {
		return !this.#awake;
	}

	/** Begins to listen; to be called in the browser once. Gives back what ends it. */
	start(): () => void {
		this.settings = loadSettings();
		this.#player = new Player(this.settings.volume);
		this.#soundChoice = readSoundChoice();
		const base = `/api/v1/winders/${this.winderId}`;
		const timers = {
			setTimeout: (run: () => void, ms: number) => window.setTimeout(run, ms),
			clearTimeout: (timer: unknown) => window.clearTimeout(timer as number)
		};
		this.#feed = new Feed(
			`${base}/live`,
			this.view,
			{
				view: (view) => this.#take(view),
				beat: (sentAt) => this.#beat(sentAt),
				streaming: (open) => (this.#streaming = open),
				access: (access) => (this.#access = access)
			},
			{ open: (url) => new EventSource(url), fetch: (url, init) => fetch(url, init), random: Math.random, ...timers }
		);
		this.#queue = new TapQueue(
			`${base}/taps`,
			this.#memberId,
			{
				changed: (waiting) => (this.#waiting = waiting),
				answered: (live) => live && this.#feed?.offer(live),
				refused: (text, live) => {
					this.#refusal = { text, untilMs: performance.now() + refusalShownMs };
					if (live) this.#feed?.offer(live);
				},
				signedOut: () => (this.#access = 'signed-out')
			},
			{
				fetch: (url, init) => fetch(url, init),
				now: Date.now,
				newId,
				store: tapStore(`turnstead.taps.${this.winderId}`),
				...timers
			}
		);
		this.#measure();
		this.hidden = document.visibilityState === 'hidden';
		this.#ticksAtMs = { monotonic: performance.now(), wall: Date.now() };
		this.#nowMs = performance.now();
		this.#feed.start();
		this.#queue.start();
		const letSleep = keepAwake((state) => (this.#awake = state === 'held'));
		const timer = window.setInterval(() => this.#tick(), tickMs);
		const ends: (() => void)[] = [];
		const on = (target: EventTarget, name: string, hear: (event: Event) => void) => {
			target.addEventListener(name, hear);
			ends.push(() => target.removeEventListener(name, hear));
		};
		on(window, 'resize', () => this.#measure());
		on(document, 'visibilitychange', () => this.#visibility());
		on(window, 'pageshow', (event) => (event as PageTransitionEvent).persisted && this.#back());
		on(window, 'online', () => this.#back());
		on(window, 'blur', () => this.#pedal.cancel());
		on(window, 'keydown', (event) => this.#keyDown(event as KeyboardEvent));
		on(window, 'keyup', (event) => this.#keyUp(event as KeyboardEvent));
		on(window, 'pointerup', () => this.#wakeSound());
		return () => {
			window.clearInterval(timer);
			for (const end of ends) end();
			letSleep();
			this.#feed?.stop();
			this.#queue?.stop();
			void this.#player?.close();
		};
	}

	/** A touch or click on one of the taps shown. */
	press(tap: BenchTap): void {
		if (!tap.enabled || !this.#pedal.allows(performance.now())) return;
		this.#do(tap.act);
	}

	/** The count in the entry field was stepped or typed. */
	enter(value: number | null): void {
		this.#entered = value;
	}

	/** The count in the entry field is the answer. */
	confirmEntry(): void {
		const entry = this.model.entry;
		if (!entry || !this.#pedal.allows(performance.now())) return;
		const turns = Math.min(entry.max, Math.max(entry.min, entry.value));
		this.#tap({ kind: entry.tap, turns });
	}

	set(part: Partial<DeviceSettings>): void {
		this.settings = { ...this.settings, ...part };
		saveSettings(this.settings);
		if (part.volume !== undefined) this.#player?.setVolume(part.volume);
	}

	/** From the sheet: hear the test tone, whatever was chosen before. */
	testSound(): void {
		this.#choose('on');
		void this.#player?.wake().then(() => {
			this.#soundAwake = this.#player?.awake === 'running';
			this.#player?.playTest();
		});
	}

	chooseScreenOnly(): void {
		this.#choose('screen-only');
	}

	#options(): PresentOptions {
		const nowMs = this.#nowMs;
		return {
			...quietOptions,
			timeZone: this.#timeZone,
			madeBeforeMs: this.#madeBeforeMs,
			delayMs: this.#arrivals?.delayMs ?? 0,
			silenceMs: Math.max(0, nowMs - this.#heardAtMs),
			streaming: this.#streaming,
			unsure: this.#unsure,
			access: this.#access,
			waitingTaps: this.#waiting.map(({ tap }) => tap.kind),
			waitingMs: this.#waiting[0] ? Math.max(0, Date.now() - this.#waiting[0].madeAt) : 0,
			refusal: this.#refusal && nowMs < this.#refusal.untilMs ? this.#refusal.text : null,
			asking: this.#asking,
			entered: this.#entered,
			keptSeenAtMs: this.#keptSeenAtMs,
			caughtUp: nowMs < this.#caughtUpUntilMs,
			missed: nowMs < this.#missed.untilMs ? this.#missed.texts : [],
			awake: this.#awake,
			sound:
				this.#soundChoice === 'screen-only'
					? 'screen-only'
					: !this.#soundAwake
						? 'asleep'
						: this.#soundTestedAtMs !== null && nowMs - this.#soundTestedAtMs >= soundAskedAfterMs
							? 'ask'
							: 'on'
		};
	}

	#take(view: LiveView): void {
		const nowMs = performance.now();
		const before = this.view;
		const wasLost =
			linkStateOf(this.#ageMs(), before.turning) === 'no-signal' || before.notices.includes('catching-up');
		this.#behind ||= wasLost && before.ageMs !== null;
		this.view = view;
		this.#nowMs = this.#receivedAtMs = this.#heardAtMs = nowMs;
		this.#madeBeforeMs = madeBeforeMs(this.#arrivals, view.at, nowMs);
		this.#unsure = false;

		const link = linkStateOf(this.#ageMs(), view.turning);
		const live = link === 'live' && !view.notices.includes('catching-up');
		if (this.#behind && live) {
			this.#behind = false;
			this.#caughtUpUntilMs = nowMs + caughtUpShownMs;
		}
		if (this.#hiddenRun && document.visibilityState === 'visible') {
			const texts = missedCues(this.#hiddenRun, view.run);
			this.#hiddenRun = null;
			if (texts.length > 0) this.#missed = { texts, untilMs: nowMs + missedShownMs };
		}
		const sameRun = before.run?.runId === view.run?.runId;
		if (view.run?.state === 'kept' && !(sameRun && before.run?.state === 'kept')) {
			this.#keptSeenAtMs = nowMs;
			if (live && sameRun && !wasLost) this.#player?.playKept();
		}
		if (!sameRun || before.run?.question !== view.run?.question || view.run?.state !== before.run?.state) {
			this.#asking = null;
			this.#entered = null;
		}
		// The test was played and the spindle turns: nobody answers now, and nobody is asked again.
		if (view.turning) this.#soundTestedAtMs = null;
		if (live && !wasLost && this.settings.countTick) {
			const mark = countMarkPassed(before, view);
			if (mark) this.#player?.playCountTick(mark === 'low');
		}
		this.#player?.follow(this.model.sound);
	}

	#ageMs(): number | null {
		return this.view.ageMs === null
			? null
			: this.view.ageMs + this.#madeBeforeMs + Math.max(0, performance.now() - this.#receivedAtMs);
	}

	#beat(sentAt: number | null): void {
		const nowMs = performance.now();
		this.#heardAtMs = nowMs;
		if (sentAt !== null) this.#arrivals = beatCame(this.#arrivals, sentAt, nowMs);
	}

	#tick(): void {
		const now = { monotonic: performance.now(), wall: Date.now() };
		// The monotonic clock stands still while some tablets sleep; the wall clock does not.
		const gapMs = Math.max(now.monotonic - this.#ticksAtMs.monotonic, now.wall - this.#ticksAtMs.wall);
		this.#ticksAtMs = now;
		this.#nowMs = now.monotonic;
		if (gapMs > sleptMs && document.visibilityState === 'visible') this.#back();
		this.#soundAwake = this.#player?.awake === 'running';
		if (!this.model.standing && this.sheetOpen) this.sheetOpen = false;
		this.#player?.follow(this.model.sound);
	}

	#visibility(): void {
		this.hidden = document.visibilityState === 'hidden';
		if (this.hidden) this.#hiddenRun = this.view.run;
		else this.#back();
	}

	/** The page was away or the network was: nothing shown is of now until something comes. */
	#back(): void {
		this.#unsure = true;
		this.#nowMs = performance.now();
		this.#ticksAtMs = { monotonic: performance.now(), wall: Date.now() };
		this.#arrivals = null;
		this.#feed?.resync();
		this.#queue?.nudge();
	}

	#measure(): void {
		this.#width = window.innerWidth;
		this.#height = window.innerHeight;
	}

	#do(act: Act): void {
		switch (act.do) {
			case 'tap':
				this.#tap(act.tap);
				break;
			case 'ask':
				this.#asking = act.asking;
				this.#entered = null;
				break;
			case 'heard':
				this.#choose(act.yes ? 'on' : 'screen-only');
				return;
			case 'screen':
				this.sheetOpen = true;
				break;
			case 'go':
				return;
		}
		this.#wakeSound();
	}

	#tap(tap: TapKind): void {
		this.#refusal = null;
		this.#asking = null;
		this.#entered = null;
		if (!this.#queue?.push(tap)) {
			this.#refusal = { text: 'too many taps wait already', untilMs: performance.now() + refusalShownMs };
		}
	}

	/** Browsers allow sound only from within a touch or a key press; the first one plays the test. */
	#wakeSound(): void {
		const player = this.#player;
		if (!player || this.#soundChoice === 'screen-only' || player.awake === 'running') return;
		const first = player.awake === 'none';
		void player.wake().then(
			() => {
				this.#soundAwake = player.awake === 'running';
				// A cue is never mistaken for a test: while the spindle turns none is played.
				if (!first || !this.#soundAwake || this.view.turning) return;
				player.playTest();
				if (this.#soundChoice === 'unasked') this.#soundTestedAtMs = performance.now();
			},
			() => (this.#soundAwake = false)
		);
	}

	#choose(choice: SoundChoice): void {
		this.#soundChoice = choice;
		this.#soundTestedAtMs = null;
		try {
			sessionStorage.setItem('turnstead.sound', choice);
		} catch {
			// Asked again after a reload.
		}
	}

	#keyDown(event: KeyboardEvent): void {
		// A key held on a button would press it again and again.
		if (event.repeat && (event.key === 'Enter' || event.key === ' ')) event.preventDefault();
		if (this.#leaveKey(event)) return;
		if (event.key === ' ' || event.key === 'PageDown') event.preventDefault();
		this.#pedal.down(event.key, event.repeat, performance.now());
	}

	#keyUp(event: KeyboardEvent): void {
		if (this.#leaveKey(event)) return this.#pedal.cancel();
		const press = this.#pedal.up(event.key, performance.now());
		if (press === null) return;
		this.#wakeSound();
		const tap = press === 'held' ? this.model.pedalHeld : this.model.pedal;
		if (tap?.enabled) this.#do(tap.act);
	}

	/** Keys belong to the sheet while it is open, to a field being typed in, and to a button the keyboard stands on. */
	#leaveKey(event: KeyboardEvent): boolean {
		if (this.sheetOpen || event.altKey || event.ctrlKey || event.metaKey) return true;
		const target = event.target instanceof Element ? event.target : null;
		if (target?.closest('input, select, textarea')) return true;
		return event.key !== 'PageDown' && target?.closest('button, a') != null;
	}
}

function readSoundChoice(): SoundChoice {
	try {
		const choice = sessionStorage.getItem('turnstead.sound');
		return choice === 'on' || choice === 'screen-only' ? choice : 'unasked';
	} catch {
		return 'unasked';
	}
}

function tapStore(key: string) {
	return {
		read: () => {
			try {
				return sessionStorage.getItem(key);
			} catch {
				return null;
			}
		},
		write: (text: string) => {
			try {
				sessionStorage.setItem(key, text);
			} catch {
				// The tap waits in memory all the same.
			}
		}
	};
}

/** A UUID also where the connection is not secure, on which browsers withhold crypto.randomUUID. */
function newId(): string {
	const bytes = crypto.getRandomValues(new Uint8Array(16));
	bytes[6] = (bytes[6]! & 0x0f) | 0x40;
	bytes[8] = (bytes[8]! & 0x3f) | 0x80;
	const hex = Array.from(bytes, (byte) => byte.toString(16).padStart(2, '0')).join('');
	return `${hex.slice(0, 8)}-${hex.slice(8, 12)}-${hex.slice(12, 16)}-${hex.slice(16, 20)}-${hex.slice(20)}`;
}
