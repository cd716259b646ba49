import type { Carrier, CarrierEvents } from '../../simulator/carrier.ts';
import { newSplitter } from '../../src/lib/turnline/index.ts';
import { plugIn, type Cable } from './pty.ts';

/** A simulated winder on a cable: it is linked as long as that is plugged in, whether anybody reads it or not. */
export interface CableCarrier extends Carrier {
	/** Pulls the cable. */
	unplug(): Promise<void>;
	/** Takes everything away at the end. */
	remove(): Promise<void>;
	/** Plugs it in again, where it gets another name. */
	replug(): Promise<void>;
	/** Bytes that are no line. */
	noise(bytes: Uint8Array): void;
}

/** @param link leads to the port, as a link in /dev/serial/by-id does */
export function openCableCarrier(link: string, events: CarrierEvents): CableCarrier {
	let cable: Cable | null = null;
	let placeholder: Cable | null = null;
	let ended = false;
	// One after the other: a supply that fails while the cable is being pulled must not mix them up.
	let turn: Promise<void> = Promise.resolve();
	const inTurn = (work: () => Promise<void>) => (turn = turn.then(work));

	const plug = async () => {
		if (cable || ended) return;
		const splitter = newSplitter();
		cable = await plugIn(link);
		cable.onBytes = (bytes) => {
			const lines = splitter.push(bytes);
			if (lines.length > 0) events.heard(lines);
		};
		events.up();
	};
	const pull = async () => {
		const pulled = cable;
		cable = null;
		if (!pulled) return;
		events.down();
		await pulled.pull();
		// It takes the name that has become free.
		const next = await plugIn(`${link}.placeholder`);
		await placeholder?.pull();
		placeholder = next;
	};
	void inTurn(plug);

	return {
		send: (lines) => cable?.send(`${lines.join('\n')}\n`),
		cut: () => void inTurn(pull),
		mend: () => void inTurn(plug),
		unplug: () => inTurn(pull),
		replug: () => inTurn(plug),
		remove: () =>
			inTurn(async () => {
				ended = true;
				await cable?.pull();
				await placeholder?.pull();
				cable = placeholder = null;
			}),
		noise: (bytes) => cable?.send(bytes),
		close(lastLine) {
			cable?.send(`${lastLine}\n`);
			// The cable stays: whoever reads it may be late.
			ended = true;
			return turn;
		}
	};
}
