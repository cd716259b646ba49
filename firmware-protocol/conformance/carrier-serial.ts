import { openLinePort } from '../../src/lib/serial/index.ts';
import { Inbox, NoWinder, realClock, type Carrier } from './carrier.ts';

/** A port that is there opens well within this. */
const openMsMax = 5_000;

/** A winder at a serial port. Throws NoWinder, with what to do, when the port does not open. */
export async function openSerial(path: string): Promise<Carrier> {
	const inbox = new Inbox();
	const nowMs = realClock();
	let lost = false;
	let opened: () => void;
	const open = new Promise<boolean>((resolve) => {
		opened = () => resolve(true);
		setTimeout(() => resolve(false), openMsMax).unref();
	});
	const port = openLinePort(path, {
		opened: () => {
			inbox.add({ atMs: nowMs(), from: 'cable', text: `${path} was opened` });
			opened();
		},
		lines: (lines) => inbox.add(...lines.map(({ text }) => ({ atMs: nowMs(), from: 'winder' as const, text }))),
		dropped: (why, count) => {
			for (let line = 0; line < count; line++) inbox.add({ atMs: nowMs(), from: 'winder', text: '', dropped: why });
		},
		lost: () => {
			lost = true;
			inbox.wake();
		}
	});
	if (!(await open)) {
		const why = port.state().trouble?.text ?? `${path} does not open.`;
		await port.close();
		throw new NoWinder(why);
	}
	const gone = () => (lost ? 'the cable was pulled, or the board went away' : null);
	return {
		wantsAcks: false,
		nowMs,
		gone,
		take: () => inbox.take(),
		send: (texts) => void port.write(texts),
		pass: (ms) => (lost ? Promise.resolve() : inbox.sleep(ms)),
		close: () => port.close()
	};
}
