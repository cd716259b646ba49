import { formatLine } from '../../turnline/index.ts';
import type { TakenIn } from './ingest.ts';

/**
 * Tells one link what is on disk, boot by boot: one waiter a link, however many lines come meanwhile.
 */
export class Acknowledger {
	readonly #send: (lines: string[]) => void;
	readonly #isOpen: () => boolean;
	readonly #acks = new Map<string, TakenIn['acks'][number]>();
	#committed: Promise<void> | null = null;
	#acking = false;

	constructor(send: (lines: string[]) => void, isOpen: () => boolean) {
		this.#send = send;
		this.#isOpen = isOpen;
	}

	/** Lines were taken in: they are acknowledged once they are committed. */
	taken({ acks, committed }: TakenIn): void {
		if (acks.length === 0) return;
		for (const ack of acks) this.#acks.set(ack.b, ack);
		this.#committed = committed;
		void this.#acknowledge();
	}

	async #acknowledge(): Promise<void> {
		if (this.#acking) return;
		this.#acking = true;
		while (this.#acks.size > 0 && this.#isOpen()) {
			const saying = [...this.#acks.values()];
			const until = this.#committed;
			this.#acks.clear();
			this.#committed = null;
			await until;
			this.#send(saying.map((ack) => formatLine({ verb: 'ACK', ...ack })));
		}
		this.#acking = false;
	}
}
