import { turnstead } from '$lib/server/app';
import { listOnBench, listWaiting } from '$lib/server/db/coils';
import { inWorkshop } from '$lib/server/db/connect';
import { listWinders } from '$lib/server/db/winders';
import type { LinkState, Notice, Question, RunState, TopFaces, Direction } from '$lib/winding/types';

/** One bench as the list of benches shows it. */
export interface BenchRow {
	winderId: string;
	name: string;
	link: LinkState;
	/** Of the last line; null before any. */
	ageMs: number | null;
	hasLinkKey: boolean;
	notices: Notice[];
	/** false: counting, not saving. */
	saving: boolean;
	run: null | {
		coilId: string;
		coilName: string;
		state: RunState;
		question: Question | null;
		target: number;
		onBobbin: number;
		left: number;
		/** It has not turned: it may go back to the queue. */
		untouched: boolean;
	};
}

/** One coil that waits, as the queue shows it. */
export interface QueueRow {
	id: string;
	name: string;
	note: string;
	target: number;
	lookEvery: number;
	direction: Direction;
	topFaces: TopFaces;
}

export interface WindNow {
	benches: BenchRow[];
	queue: QueueRow[];
}

/** The benches and the queue as they are at this moment. */
export async function windNow(db: App.Locals['db'], workshopId: string): Promise<WindNow> {
	const { winders, waiting, onBench } = await inWorkshop(db, workshopId, async (trx) => ({
		winders: await listWinders(trx, workshopId),
		waiting: await listWaiting(trx, workshopId),
		onBench: new Set((await listOnBench(trx, workshopId)).map((coil) => coil.id))
	}));
	const { ingest } = turnstead();
	const benches = await Promise.all(
		winders.map(async (winder): Promise<BenchRow> => {
			const view = await ingest.view(workshopId, winder.id);
			const run = view?.run ?? null;
			return {
				winderId: winder.id,
				name: winder.name,
				link: view?.link ?? 'never',
				ageMs: view?.ageMs ?? null,
				hasLinkKey: winder.hasLinkKey,
				notices: view?.notices ?? [],
				saving: view?.saving ?? true,
				run: run && {
					coilId: run.coil.coilId,
					coilName: run.coil.name,
					state: run.state,
					question: run.question,
					target: run.target,
					onBobbin: run.onBobbin,
					left: run.left,
					untouched: run.state === 'waiting' && run.turns === 0 && onBench.has(run.coil.coilId)
				}
			};
		})
	);
	const queue = waiting.map(({ id, name, note, target, lookEvery, direction, topFaces }) => ({
		id,
		name,
		note,
		target,
		lookEvery,
		direction,
		topFaces
	}));
	return { benches, queue };
}
