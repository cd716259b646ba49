import { describe, expect, it } from 'vitest';
import { aView } from './example-view.ts';
import { backOffMs, Feed, isNewer, silenceMsMax, type FeedParts } from './feed.ts';
import type { LiveView } from '../winding/types.ts';

class HandSource {
	readyState = 1;
	listeners = new Map<string, (event: { data: string }) => void>();
	addEventListener(name: string, listener: (event: { data: string }) => void) {
		this.listeners.set(name, listener);
	}
	close() {
		this.readyState = 2;
	}
	say(name: string, data: unknown = '') {
		this.listeners.get(name)?.({ data: typeof data === 'string' ? data : JSON.stringify(data) });
	}
	fail(readyState: number) {
		this.readyState = readyState;
		this.say('error');
	}
}

function bench(
	shown: LiveView | null = null,
	answer: () => Promise<Response> = () => Promise.reject(new Error('off'))
) {
	const sources: HandSource[] = [];
	const timers: { run: () => void; ms: number; live: boolean }[] = [];
	const told: string[] = [];
	const parts: FeedParts = {
		open: () => {
			const source = new HandSource();
			sources.push(source);
			return source as unknown as EventSource;
		},
		fetch: answer,
		setTimeout: (run, ms) => {
			const timer = { run, ms, live: true };
			timers.push(timer);
			return timer;
		},
		clearTimeout: (timer) => {
			(timer as { live: boolean }).live = false;
		},
		random: () => 0.5
	};
	const feed = new Feed(
		'/live',
		shown,
		{
			view: ({ server, seq }) => told.push(`view ${server} ${seq}`),
			beat: (sentAt) => told.push(`beat ${sentAt}`),
			streaming: (open) => told.push(`streaming ${open}`),
			access: (access) => told.push(access)
		},
		parts
	);
	feed.start();
	const fire = (ms?: number) => {
		const timer = timers.find((one) => one.live && (ms === undefined || one.ms === ms));
		if (!timer) throw new Error('no timer runs');
		timer.live = false;
		timer.run();
	};
	return { feed, sources, timers, told, fire };
}

const at = (seq: number, server = 'server-1') => aView({ seq, server });

describe('the newest state wins', () => {
	it('an older state of the same server start is dropped, any state of a new start is taken', () => {
		expect(isNewer(null, at(1))).toBe(true);
		expect(isNewer(at(7), at(6))).toBe(false);
		expect(isNewer(at(7), at(8))).toBe(true);
		expect(isNewer(at(7), at(1, 'server-2'))).toBe(true);
	});

	it('a late state from before the answer to a tap does not come back', () => {
		const { feed, sources, told } = bench();
		sources[0]!.say('live', at(4));
		feed.offer(at(9));
		sources[0]!.say('live', at(8));
		expect(told.filter((text) => text.startsWith('view'))).toEqual(['view server-1 4', 'view server-1 9']);
	});

	it('an event that is no state changes nothing', () => {
		const { sources, told } = bench();
		sources[0]!.say('live', '<html>');
		sources[0]!.say('live', { seq: 'x' });
		expect(told).toEqual([]);
	});
});

describe('the stream is rebuilt', () => {
	it('waits longer each time, with chance in it, and never beyond two seconds', () => {
		expect(backOffMs(0, 0)).toBe(75);
		expect(backOffMs(0, 1)).toBe(150);
		expect(backOffMs(3, 0.5)).toBe(900);
		expect(backOffMs(50, 1)).toBe(2_000);
	});

	it('a broken stream is opened anew and its first state taken', () => {
		const { sources, told, fire } = bench(at(40));
		sources[0]!.fail(0);
		expect(sources[0]!.readyState).toBe(2);
		fire(backOffMs(0, 0.5));
		sources[1]!.say('live', at(1, 'server-2'));
		expect(told).toEqual(['streaming false', 'streaming true', 'ok', 'view server-2 1']);
	});

	it('a stream that falls silent is opened anew', () => {
		const { sources, fire } = bench();
		sources[0]!.say('beat', { at: 5 });
		fire(silenceMsMax);
		fire(backOffMs(0, 0.5));
		expect(sources).toHaveLength(2);
		expect(sources[0]!.readyState).toBe(2);
	});

	it('what an abandoned stream still says is not heard', () => {
		const { feed, sources, told } = bench();
		feed.resync();
		sources[0]!.say('live', at(50));
		expect(told).toEqual([]);
		expect(sources).toHaveLength(2);
	});

	it('a stopped feed opens nothing more', () => {
		const { feed, sources, timers } = bench();
		feed.stop();
		expect(timers.every(({ live }) => !live)).toBe(true);
		feed.resync();
		expect(sources).toHaveLength(1);
	});
});

describe('no stream, and why', () => {
	const refused = async (status: number, body = '', type = 'application/problem+json') => {
		const parts = bench(null, () => Promise.resolve(new Response(body, { status, headers: { 'content-type': type } })));
		parts.sources[0]!.fail(2);
		await new Promise((resolve) => setImmediate(resolve));
		return parts.told;
	};

	it.each([
		[401, 'signed-out'],
		[403, 'not-allowed'],
		[404, 'gone']
	])('an answer of %i is told as %s', async (status, access) => {
		expect(await refused(status)).toEqual(['streaming false', access]);
	});

	it('a 502 and a page of somebody else are not taken for an answer', async () => {
		expect(await refused(502)).toEqual(['streaming false']);
		expect(await refused(200, '<html>', 'text/html')).toEqual(['streaming false']);
	});

	it('a plain answer shows the state while the stream is rebuilt', async () => {
		const told = await refused(200, JSON.stringify(at(3)), 'application/json');
		expect(told).toEqual(['streaming false', 'ok', 'view server-1 3']);
	});
});
