import { openLinePort } from '../../src/lib/serial/index.ts';
import { Inbox, NoWinder, realClock, winderMsMax, type Carrier } from './carrier.ts';

/**
 * A winder at a serial port. Says what stands in the way and waits for the port; throws NoWinder when it does not open in time.
 *
 * @param waitMs how long it waits
 */
export async function openSerial(
	path: string,
	tell: (text: string) => void,
	waitMs: number = winderMsMax
): Promise<Carrier> {
	const inbox = new Inbox();
	let nowMs = realClock();
	let lost = false;
	let late: NodeJS.Timeout | undefined;
	let answer: (open: boolean) => void;
	const open = new Promise<boolean>((resolve) => {
		answer = resolve;
		late = setTimeout(() => resolve(false), waitMs);
	});
	const port = openLinePort(path, {
		opened: () => {
			clearTimeout(late);
			if (lost) return;
			nowMs = realClock();
			inbox.add({ atMs: 0, from: 'cable', text: `${path} was opened` });
			answer(true);
		},
		lines: (lines) => inbox.add(...lines.map(({ text }) => ({ atMs: nowMs(), from: 'winder' as const, text }))),
		dropped: (why, count) => {
			for (let line = 0; line < count; line++) inbox.add({ atMs: nowMs(), from: 'winder', text: '', dropped: why });
		},
		// Opened again it would be another session.
		lost: () => {
			lost = true;
			inbox.wake();
		},
		trouble: (trouble) => {
			if (trouble && !lost) tell(trouble.text);
		}
	});
	if (!(await open)) {
		await port.close();
		throw new NoWinder(`${path} did not open within ${waitMs / 1000} s. No session was begun.`);
	}
	return {
		wantsAcks: false,
		nowMs: () => nowMs(),
		gone: () => (lost ? 'the cable was pulled, or the board went away' : null),
		take: () => inbox.take(),
		send: (texts) => void port.write(texts),
		pass: (ms) => (lost ? Promise.resolve() : inbox.sleep(ms)),
		close: () => port.close()
	};
}
