import { describe, expect, it } from 'vitest';
import { aView } from './example-view.ts';
import { TapQueue, type TapParts } from './tap-queue.ts';

const json = (status: number, body: unknown) =>
	new Response(JSON.stringify(body), { status, headers: { 'content-type': 'application/json' } });

function bench(answers: (() => Promise<Response>)[], stored: string | null = null, memberId = 'member-1') {
	const sent: Record<string, unknown>[] = [];
	const told: string[] = [];
	const timers: { run: () => void; live: boolean }[] = [];
	const state = { stored, now: 1_000, ids: 0 };
	const parts: TapParts = {
		fetch: (_, init) => {
			sent.push(JSON.parse(init.body as string) as Record<string, unknown>);
			const answer = answers.shift();
			if (!answer) throw new Error('one request too many');
			return answer();
		},
		setTimeout: (run) => {
			const timer = { run, live: true };
			timers.push(timer);
			return timer;
		},
		clearTimeout: (timer) => {
			(timer as { live: boolean }).live = false;
		},
		now: () => state.now,
		newId: () => `tap-${(state.ids += 1)}`,
		store: { read: () => state.stored, write: (text) => (state.stored = text) }
	};
	const queue = new TapQueue(
		'/taps',
		memberId,
		{
			changed: (waiting) => told.push(`waiting ${waiting.length}`),
			answered: (live) => told.push(`answered ${live?.seq}`),
			refused: (reason) => told.push(reason),
			signedOut: () => told.push('signed out')
		},
		parts
	);
	queue.start();
	const settle = () => new Promise((resolve) => setImmediate(resolve));
	const retry = async () => {
		const timer = timers.find(({ live }) => live);
		if (!timer) throw new Error('no retry is planned');
		timer.live = false;
		timer.run();
		await settle();
	};
	return { queue, sent, told, state, settle, retry, timers };
}

const yes = () => Promise.resolve(json(200, { ok: true, pending: false, live: aView({ seq: 12 }) }));
const offline = () => Promise.reject(new TypeError('Failed to fetch'));

describe('taps on their way', () => {
	it('a tap is sent with its id and age, and forgotten once answered', async () => {
		const { queue, sent, told, state, settle } = bench([yes]);
		queue.push({ kind: 'keep' });
		await settle();
		expect(sent).toEqual([{ kind: 'keep', id: 'tap-1', ageMs: 0 }]);
		expect(told).toEqual(['waiting 0', 'waiting 1', 'waiting 0', 'answered 12']);
		expect(state.stored).toBe('[]');
	});

	it('offline it waits, and comes again with the same id and a greater age', async () => {
		const { queue, sent, state, settle, retry } = bench([offline, offline, yes]);
		queue.push({ kind: 'keep' });
		await settle();
		state.now += 700;
		await retry();
		state.now += 1_300;
		await retry();
		expect(sent.map(({ id, ageMs }) => [id, ageMs])).toEqual([
			['tap-1', 0],
			['tap-1', 700],
			['tap-1', 2_000]
		]);
		expect(queue.waiting).toHaveLength(0);
	});

	it('taps are sent in the order they were made', async () => {
		const { queue, sent, settle, retry } = bench([offline, yes, yes]);
		queue.push({ kind: 'taking-off' });
		queue.push({ kind: 'taking-off-done' });
		await settle();
		await retry();
		expect(sent.map(({ kind }) => kind)).toEqual(['taking-off', 'taking-off', 'taking-off-done']);
	});

	it('a reload takes up what waits', async () => {
		const before = bench([offline]);
		before.queue.push({ kind: 'snap-at', turns: 2_950 });
		await before.settle();
		const after = bench([yes], before.state.stored);
		await after.settle();
		expect(after.sent).toEqual([{ kind: 'snap-at', turns: 2_950, id: 'tap-1', ageMs: 0 }]);
	});

	it('another person on the same tablet does not send it', async () => {
		const before = bench([offline]);
		before.queue.push({ kind: 'keep' });
		await before.settle();
		const after = bench([], before.state.stored, 'member-2');
		await after.settle();
		expect(after.sent).toEqual([]);
	});

	it('a store that holds something else is ignored', async () => {
		const { told, settle } = bench([], '{"not":"taps"}');
		await settle();
		expect(told).toEqual(['waiting 0']);
	});

	it('a refusal shows its plain reason and is not sent again', async () => {
		const { queue, told, settle, timers } = bench([() => Promise.resolve(json(409, { detail: 'The spindle turns.' }))]);
		queue.push({ kind: 'keep' });
		await settle();
		expect(told.at(-1)).toBe('The spindle turns.');
		expect(queue.waiting).toHaveLength(0);
		expect(timers).toHaveLength(0);
	});

	it.each([503, 502, 429, 408])('an answer of %i keeps the tap', async (status) => {
		const { queue, settle, retry } = bench([() => Promise.resolve(json(status, {})), yes]);
		queue.push({ kind: 'keep' });
		await settle();
		expect(queue.waiting).toHaveLength(1);
		await retry();
		expect(queue.waiting).toHaveLength(0);
	});

	it('a page of somebody else with 200 is no answer', async () => {
		const { queue, settle } = bench([() => Promise.resolve(new Response('<html>', { status: 200 }))]);
		queue.push({ kind: 'keep' });
		await settle();
		expect(queue.waiting).toHaveLength(1);
	});

	it('signed out, the tap is kept and the maker told', async () => {
		const { queue, told, settle } = bench([() => Promise.resolve(json(401, {}))]);
		queue.push({ kind: 'keep' });
		await settle();
		expect(told.at(-1)).toBe('signed out');
		expect(queue.waiting).toHaveLength(1);
	});

	it('the network coming back sends at once', async () => {
		const { queue, settle } = bench([offline, yes]);
		queue.push({ kind: 'keep' });
		await settle();
		queue.nudge();
		await settle();
		expect(queue.waiting).toHaveLength(0);
	});

	it('no more than twenty wait', async () => {
		const { queue } = bench([offline]);
		const taken = Array.from({ length: 25 }, () => queue.push({ kind: 'keep' }));
		expect(taken.filter(Boolean)).toHaveLength(20);
	});
});
