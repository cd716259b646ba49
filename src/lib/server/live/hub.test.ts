import { describe, expect, it } from 'vitest';
import { newWinder, viewOf } from '../../winding/winder.ts';
import { liveEventStream } from './event-stream.ts';
import { createLiveHub, type UnstampedView } from './hub.ts';

const config = {
	pulsesPerTurn: 1,
	rpmMax: 2000,
	seesDirection: true,
	forwardIs: 'counter-clockwise' as const,
	easeEarlyTurns: 40,
	stopEarlyTurns: 3,
	timeScale: 1,
	keepAfterMs: null
};

function viewWith(forward: number, winderId = 'w'): UnstampedView {
	const rest = { winderId, winderName: 'w-01', unsaved: 0, saving: true, next: null, waiting: 0 };
	return { ...viewOf(newWinder(), config, 0), ...rest, forward };
}

describe('the live hub', () => {
	it('numbers what it tells, and names this server start', () => {
		const hub = createLiveHub();
		const first = hub.publish('shop', viewWith(1));
		const second = hub.publish('shop', viewWith(2));
		expect(second.seq).toBeGreaterThan(first.seq);
		expect(second.server).toBe(first.server);
		expect(createLiveHub().server).not.toBe(hub.server);
	});

	it('tells a watcher the latest at once, then what comes', async () => {
		const hub = createLiveHub();
		hub.publish('shop', viewWith(1));
		const watcher = hub.open('shop', 'w');
		expect(await watcher.next()).toMatchObject({ kind: 'live', view: { forward: 1 } });
		const coming = watcher.next();
		hub.publish('shop', viewWith(2));
		expect(await coming).toMatchObject({ kind: 'live', view: { forward: 2 } });
	});

	it('holds one view for a reader that stalls, the newest', async () => {
		const hub = createLiveHub();
		const response = liveEventStream(hub, 'shop', 'w', new AbortController().signal, async () => true);
		const reader = response.body!.getReader();
		await reader.read();
		for (let i = 1; i <= 1000; i++) hub.publish('shop', viewWith(i));
		const text = new TextDecoder().decode((await reader.read()).value);
		expect(text).toContain('"forward":1000');
		let told = false;
		void reader.read().then(() => (told = true));
		await Promise.resolve();
		expect(told).toBe(false);
		hub.close();
	});

	it('ends a stream whose reader may read no more, and not while that cannot be asked', async () => {
		const hub = createLiveHub();
		let answer: () => Promise<boolean> = () => Promise.reject(new Error('the database is away'));
		const response = liveEventStream(hub, 'shop', 'w', new AbortController().signal, () => answer());
		const reader = response.body!.getReader();
		await reader.read();
		const beat = async () => {
			const read = reader.read();
			hub.beat();
			return read;
		};
		for (let i = 1; i <= 6; i++) expect((await beat()).done).toBe(false);
		answer = async () => false;
		for (let i = 7; i <= 9; i++) expect((await beat()).done).toBe(false);
		expect((await beat()).done).toBe(true);
		expect(hub.watchers('shop', 'w')).toBe(0);
	});

	it('keeps workshops and winders apart', async () => {
		const hub = createLiveHub();
		const watcher = hub.open('shop', 'w');
		hub.publish('other', viewWith(1));
		hub.publish('shop', viewWith(2, 'v'));
		hub.publish('shop', viewWith(3));
		expect(await watcher.next()).toMatchObject({ view: { forward: 3 } });
		expect(hub.latest('other', 'v')).toBeNull();
	});

	it('ends a watcher with its signal, and every one when it closes', async () => {
		const hub = createLiveHub();
		const stopper = new AbortController();
		const one = hub.open('shop', 'w', stopper.signal);
		const two = hub.open('shop', 'w');
		expect(hub.watchers('shop', 'w')).toBe(2);
		stopper.abort();
		expect(await one.next()).toEqual({ kind: 'ended' });
		expect(hub.watchers('shop', 'w')).toBe(1);
		const waiting = two.next();
		hub.close();
		expect(await waiting).toEqual({ kind: 'ended' });
		expect(await hub.open('shop', 'w').next()).toEqual({ kind: 'ended' });
	});

	it('says when a winder is watched first', () => {
		const hub = createLiveHub();
		const heard: string[] = [];
		hub.onWatched((shop, winder) => heard.push(`${shop}/${winder}`));
		const one = hub.open('shop', 'w');
		hub.open('shop', 'w');
		expect(heard).toEqual(['shop/w']);
		one.end();
	});

	it('can be read as an iterator of views', async () => {
		const hub = createLiveHub();
		hub.publish('shop', viewWith(1));
		const seen: number[] = [];
		for await (const view of hub.watch('shop', 'w')) {
			seen.push(view.forward);
			if (view.forward === 2) break;
			hub.beat();
			hub.publish('shop', viewWith(2));
		}
		expect(seen).toEqual([1, 2]);
		expect(hub.watchers('shop', 'w')).toBe(0);
	});
});
