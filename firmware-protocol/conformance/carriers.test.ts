import { afterEach, describe, expect, it } from 'vitest';
import WebSocket from 'ws';
import { NoWinder, type Carrier, type Heard } from './carrier.ts';
import { openExec } from './carrier-exec.ts';
import { openWs } from './carrier-ws.ts';

const closing: (() => unknown)[] = [];
afterEach(async () => {
	for (const close of closing.splice(0).reverse()) await close();
});

/** What comes until so many lines are there. */
async function heard(carrier: Carrier, count: number): Promise<Heard[]> {
	const all: Heard[] = [];
	while (all.length < count) {
		await carrier.pass(1_000);
		all.push(...carrier.take());
	}
	return all;
}

describe('a program', () => {
	it('is heard on its standard output and spoken to on its standard input', async () => {
		const carrier = openExec(`sh -c 'while read -r line; do echo "heard $line"; done'`);
		closing.push(() => carrier.close());
		carrier.send(['one', 'two']);
		expect((await heard(carrier, 3)).map(({ from, text }) => [from, text])).toEqual([
			['link', 'the program was started'],
			['winder', 'heard one'],
			['winder', 'heard two']
		]);
	});

	it('that ends is gone, with how it ended', async () => {
		const carrier = openExec('sh -c "exit 3"');
		closing.push(() => carrier.close());
		while (carrier.gone() === null) await carrier.pass(1_000).then(() => carrier.take());
		expect(carrier.gone()).toBe('the program ended (exit code 3)');
	});
});

describe('a WebSocket', () => {
	/** Opens a listener and answers it with where it listens. */
	async function listening(path = '/api/v1/link'): Promise<{ url: string; carrier: Promise<Carrier> }> {
		let carrier!: Promise<Carrier>;
		const url = await new Promise<string>((resolve) => {
			carrier = openWs(new URL(`ws://127.0.0.1:0${path}`), (text) => resolve(/ws:\S+(?=,)/.exec(text)![0]));
		});
		closing.push(async () => (await carrier).close());
		return { url, carrier };
	}

	it('brings messages of several lines, and lines back; a second link is a new one', async () => {
		const { url, carrier: opening } = await listening();
		const winder = new WebSocket(url, ['turnline.1'], { headers: { authorization: 'Bearer any-key-will-do' } });
		const back = new Promise<string>((resolve) => winder.on('message', (data) => resolve(String(data))));
		winder.on('open', () => winder.send('one\ntwo'));
		const carrier = await opening;
		expect(carrier.wantsAcks).toBe(true);
		expect((await heard(carrier, 3)).map(({ from, text }) => [from, text])).toEqual([
			['link', 'the winder opened a link'],
			['winder', 'one'],
			['winder', 'two']
		]);
		carrier.send(['?', 'TIME u=1']);
		expect(await back).toBe('?\nTIME u=1');
		const again = new WebSocket(url, ['turnline.1']);
		again.on('open', () => again.send('three\n'));
		expect((await heard(carrier, 2)).map(({ from }) => from)).toEqual(['link', 'winder']);
	});

	it('without the subprotocol is refused', async () => {
		const { url, carrier } = await listening();
		const status = await new Promise((resolve) =>
			new WebSocket(url).on('error', () => {}).on('unexpected-response', (_, response) => resolve(response.statusCode))
		);
		expect(status).toBe(400);
		new WebSocket(url, ['turnline.1']).on('error', () => {});
		await carrier;
	});

	it('an address of another computer cannot be listened at, and a person is told', async () => {
		await expect(openWs(new URL('ws://192.0.2.1:4180/api/v1/link'), () => {})).rejects.toThrow(NoWinder);
	});
});
