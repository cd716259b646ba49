import { randomUUID } from 'node:crypto';
import { addCoil, type Coil } from '../../src/lib/server/db/coils.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import type { Database } from '../../src/lib/server/db/schema.ts';
import { addWinder, newLinkKey } from '../../src/lib/server/db/winders.ts';
import { IngestCore, type IngestOptions } from '../../src/lib/server/ingest/ingest.ts';
import { createLiveHub, type LiveHub } from '../../src/lib/server/live/hub.ts';
import { formatLine, type EventKind, type Line } from '../../src/lib/turnline/index.ts';
import type { Tap, TapKind } from '../../src/lib/winding/types.ts';
import type { Kysely } from 'kysely';
import type { TestDatabase } from './harness.ts';

/** A wall clock that stands until it is moved. */
export class Clock {
	now = Date.UTC(2026, 2, 2, 9, 0, 0);
	pass(ms: number): void {
		this.now += ms;
	}
}

export interface Shop {
	id: string;
	ada: string;
	winderId: string;
	linkKey: string;
}

let made = 0;

/** A workshop with one member and one winder that sees direction. */
export async function makeShop(db: TestDatabase): Promise<Shop> {
	const shop = await db.owner
		.insertInto('workshop')
		.values({ short_name: `b${++made}`, name: 'Hollow Lane workshop', time_zone: 'Europe/London' })
		.returning('id')
		.executeTakeFirstOrThrow();
	const ada = await db.owner
		.insertInto('member')
		.values({ workshop_id: shop.id, email: `ada${made}@hollow-lane.example`, name: 'Ada Quill', role: 'maker' })
		.returning('id')
		.executeTakeFirstOrThrow();
	const { winderId, linkKey } = await makeWinder(db, shop.id, 'w-01');
	return { id: shop.id, ada: ada.id, winderId, linkKey };
}

export async function makeWinder(
	db: TestDatabase,
	workshopId: string,
	name: string
): Promise<{ winderId: string; linkKey: string }> {
	return inWorkshop(db.app, workshopId, async (trx) => {
		const added = await addWinder(trx, workshopId, {
			name,
			pulsesPerTurn: 1,
			rpmMax: 2000,
			seesDirection: true,
			forwardIs: 'counter-clockwise',
			easeEarlyTurns: 40,
			stopEarlyTurns: 3,
			keepAfterS: null
		});
		if (!added.ok) throw new Error(added.why);
		const linkKey = await newLinkKey(trx, workshopId, added.winder.id);
		if (linkKey === null) throw new Error('no key');
		return { winderId: added.winder.id, linkKey };
	});
}

export async function queueCoil(db: TestDatabase, workshopId: string, name: string, target = 100): Promise<Coil> {
	return inWorkshop(db.app, workshopId, (trx) =>
		addCoil(
			trx,
			workshopId,
			{
				name,
				note: '',
				target,
				lookEvery: 0,
				direction: 'counter-clockwise',
				topFaces: 'out',
				toleranceTurns: 5
			},
			{ createdBy: null }
		)
	);
}

/** The server's half that takes lines in, on a clock that stands. */
export function makeIngest(
	db: Kysely<Database>,
	clock: Clock,
	more: Partial<IngestOptions> = {}
): { ingest: IngestCore; live: LiveHub } {
	const live = createLiveHub();
	// Limits per second follow the same clock, so that no test depends on how fast the machine is.
	const ingest = new IngestCore({
		db,
		live,
		now: () => clock.now,
		steady: () => clock.now,
		onError: () => {},
		...more
	});
	return { ingest, live };
}

/** A counter on a spindle: each line moves its own time and the wall clock on together. */
export class Counter {
	n = 0;
	e = 0;
	f = 0;
	v = 0;
	t = 0;
	constructor(
		readonly clock: Clock,
		public b: string
	) {}

	#pass(ms: number): void {
		this.t += ms;
		this.clock.pass(ms);
	}

	#totals() {
		return { b: this.b, n: this.n, e: this.e, f: this.f, v: this.v, t: this.t };
	}

	hi(more: Partial<Line> = {}): string {
		return formatLine({
			verb: 'HI',
			p: 1,
			dev: 'w-01',
			ppr: 1,
			dir: 1,
			rep: 100,
			buf: 256,
			...this.#totals(),
			...more
		} as Line);
	}

	tick(turns = 0, ms = 100, r = Math.round((turns / ms) * 60_000)): string {
		this.#pass(ms);
		this.n += 1;
		this.f += turns;
		return formatLine({ verb: 'T', ...this.#totals(), r });
	}

	event(k: EventKind, ms = 1): string {
		this.#pass(ms);
		this.n += 1;
		this.e += 1;
		return formatLine({ verb: 'E', ...this.#totals(), k });
	}

	/** From standing to standing: `turns` at a believable speed, slowing down at the end. */
	wind(turns: number): string[] {
		const lines = [this.event('go')];
		let left = turns;
		while (left > 10) {
			lines.push(this.tick(1));
			left -= 1;
		}
		for (let ms = 100; left > 0; left -= 1, ms += 40) lines.push(this.tick(1, ms));
		lines.push(this.event('stop', 500), this.tick(0, 600, 0));
		return lines;
	}
}

export function tapOf(kind: TapKind, memberId: string | null, id: string = randomUUID()): Tap {
	return { ...kind, id, memberId };
}
