import { openLinePort, type HeardLine, type LinePort, type LinePortState, type TtyPlaces } from '../../serial/index.ts';
import { formatLine, holdMsMax, messageLinesMax } from '../../turnline/index.ts';
import type { SerialWinder } from '../env.ts';
import { Acknowledger } from './acknowledger.ts';
import type { IngestCore } from './ingest.ts';
import type { LinkKeys } from './keys.ts';
import type { SeatLink } from './seat.ts';
import type { WinderRef } from './types.ts';

/** What a winder is told when its lines cannot be taken, and how long this is not tried again after a failure. */
const holdWhenNotSavedMs = 2_000;
const attachAgainMs = 2_000;

export interface SerialPortNow extends LinePortState {
	/** null: its link key belongs to no winder, or nothing was heard yet. */
	winder: WinderRef | null;
	/** For a person: what is wrong with the port or its key; null: nothing. */
	problem: string | null;
}

export interface SerialLinks {
	now(): SerialPortNow[];
	close(): Promise<void>;
}

/** The serial carrier: ports of this machine, each with the link key of the winder at it. */
export function openSerialLinks(
	ingest: IngestCore,
	keys: LinkKeys,
	winders: readonly SerialWinder[],
	options: { tell?: (text: string) => void; places?: TtyPlaces } = {}
): SerialLinks {
	const links = winders.map(
		(winder) => new SerialLink(ingest, keys, winder, options.tell ?? console.log, options.places)
	);
	return {
		now: () => links.map((link) => link.now()),
		close: async () => void (await Promise.all(links.map((link) => link.close())))
	};
}

class SerialLink {
	readonly #ingest: IngestCore;
	readonly #keys: LinkKeys;
	readonly #winder: SerialWinder;
	readonly #tell: (text: string) => void;
	readonly #port: LinePort;
	readonly #acknowledger: Acknowledger;
	readonly #link: SeatLink;
	#ref: WinderRef | null = null;
	/** Leaves the seat; null: it holds none. */
	#detach: (() => void) | null = null;
	#attachAt = 0;
	#keyProblem: string | null = null;
	#turn: Promise<void> = Promise.resolve();

	constructor(
		ingest: IngestCore,
		keys: LinkKeys,
		winder: SerialWinder,
		tell: (text: string) => void,
		places?: TtyPlaces
	) {
		this.#ingest = ingest;
		this.#keys = keys;
		this.#winder = winder;
		this.#tell = tell;
		const send = (lines: string[]) => void this.#port.write(lines);
		this.#acknowledger = new Acknowledger(send, () => this.#port.state().openAs !== null);
		// The key was revoked or the winder removed: the next lines find out which, and what to say.
		this.#link = { send, close: () => this.#leave(), byKey: true };
		this.#port = openLinePort(
			winder.path,
			{
				lines: (lines, at) => this.#inTurn(() => this.#take(lines, at)),
				dropped: (why, lines, at) =>
					void this.#inTurn(async () => {
						if (this.#ref) await this.#ingest.noteDropped(this.#ref, why, lines, at);
					}),
				opened: (path) => {
					this.#tell(`A winder is read at ${path}.`);
					// The totals of now: it may have been counting for long.
					this.#port.write([formatLine({ verb: '?' })]);
				},
				lost: () => {
					this.#tell(`The winder at ${winder.path} is gone: cable pulled, or no supply. It is looked for.`);
					this.#leave();
				},
				trouble: (trouble) => {
					if (trouble) this.#tell(trouble.text);
				}
			},
			places
		);
		// So that the winder's page can say what is wrong with a port that does not even open.
		this.#turn = this.#keys.find(winder.linkKey).then(
			(ref) => this.#know(ref),
			() => {}
		);
	}

	now(): SerialPortNow {
		const state = this.#port.state();
		return { ...state, winder: this.#ref, problem: state.trouble?.text ?? this.#keyProblem };
	}

	async close(): Promise<void> {
		await this.#port.close();
		await this.#turn;
		this.#leave();
	}

	/** In the order they came, also while the winder is being read from disk; the port waits for it. */
	#inTurn(work: () => Promise<void>): Promise<void> {
		this.#turn = this.#turn.then(work).catch((error) => {
			console.error(`lines from ${this.#winder.path} could not be taken in:`, error);
			this.#hold(holdWhenNotSavedMs);
		});
		return this.#turn;
	}

	async #take(lines: readonly HeardLine[], at: number): Promise<void> {
		const ref = await this.#keys.find(this.#winder.linkKey);
		this.#know(ref);
		if (!ref) return;
		for (let from = 0; from < lines.length; from += messageLinesMax) {
			const texts = lines.slice(from, from + messageLinesMax).map(({ text }) => text);
			const step = await this.#ingest.takeIn(ref, texts, 'serial', at);
			if (step.ok) this.#acknowledger.taken(step.taken);
			else if (step.why === 'rate') this.#hold(step.retryAfterS * 1000);
			else if (step.why === 'not-saved') this.#hold(holdWhenNotSavedMs);
		}
		await this.#attach(ref);
	}

	/** Joins the winder's seat, so that commands find their way down. */
	async #attach(ref: WinderRef): Promise<void> {
		const now = performance.now();
		if (this.#detach || now < this.#attachAt || this.#port.state().openAs === null) return;
		this.#attachAt = now + attachAgainMs;
		const attached = await this.#ingest.attach(ref, this.#link);
		if (!attached.ok) {
			if (attached.why === 'full') this.#tell(`The winder at ${this.#winder.path} has as many links as it may.`);
			return;
		}
		this.#detach = attached.detach;
		if (this.#port.state().openAs === null) this.#leave();
	}

	#leave(): void {
		this.#detach?.();
		this.#detach = null;
		this.#attachAt = 0;
	}

	#know(ref: WinderRef | null): void {
		if (ref?.winderId !== this.#ref?.winderId) this.#leave();
		this.#ref = ref;
		const problem = ref
			? null
			: `What comes from ${this.#winder.path} is not saved: the link key given for it in WINDER_SERIAL belongs to no winder. ` +
				'Nothing is acknowledged, so the winder keeps its lines. Make a new key on its page, and start with it.';
		if (problem !== null && problem !== this.#keyProblem) this.#tell(problem);
		this.#keyProblem = problem;
	}

	#hold(ms: number): void {
		this.#port.write([formatLine({ verb: 'HOLD', ms: Math.min(ms, holdMsMax) })]);
	}
}
