import { insertWorkshop } from '../../src/lib/server/db/admin.ts';
import { throwawayCluster } from '../../src/commands/cluster.ts';
import { addCoil } from '../../src/lib/server/db/coils.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import { addWinder, newLinkKey } from '../../src/lib/server/db/winders.ts';
import { copyOf, makeTemplate, type TestDatabase } from '../db/harness.ts';

/** More than any round winds, so that no run ends while it is measured. */
const targetTurns = 50_000;

export interface Ground {
	/** A database nothing was written to, with one workshop in it. */
	newWorkshop(): Promise<BenchWorkshop>;
	remove(): Promise<void>;
}

export interface BenchWorkshop {
	id: string;
	database: TestDatabase;
	/** Winders with link keys, and for each a coil in the queue where asked. */
	addWinders(count: number, withCoils?: boolean): Promise<BenchWinder[]>;
}

export interface BenchWinder {
	id: string;
	linkKey: string;
}

/** A PostgreSQL of our own that writes to disk as one in use does. */
export async function prepareGround(): Promise<Ground> {
	const cluster = await throwawayCluster({ durable: true });
	const databases: TestDatabase[] = [];
	try {
		const template = await makeTemplate(cluster.url);
		return {
			async newWorkshop() {
				const database = await copyOf(cluster.url, template);
				databases.push(database);
				return makeWorkshop(database);
			},
			async remove() {
				for (const database of databases) await database.drop();
				await cluster.remove();
			}
		};
	} catch (error) {
		await cluster.remove();
		throw error;
	}
}

async function makeWorkshop(database: TestDatabase): Promise<BenchWorkshop> {
	const about = { shortName: 'hollow', name: 'Hollow Lane workshop', timeZone: 'UTC' };
	const id = await insertWorkshop(database.owner, about);
	let made = 0;
	return {
		id,
		database,
		addWinders: (count, withCoils = false) =>
			inWorkshop(database.owner, id, async (trx) => {
				const winders: BenchWinder[] = [];
				for (let i = 0; i < count; i += 1) {
					made += 1;
					const added = await addWinder(trx, id, {
						name: `w-${made}`,
						pulsesPerTurn: 1,
						rpmMax: 2000,
						seesDirection: true,
						forwardIs: 'counter-clockwise',
						easeEarlyTurns: 40,
						stopEarlyTurns: 3,
						keepAfterS: null
					});
					if (!added.ok) throw new Error(`no winder was added: ${added.why}`);
					const linkKey = await newLinkKey(trx, id, added.winder.id);
					if (linkKey === null) throw new Error('the winder just added is not there');
					winders.push({ id: added.winder.id, linkKey });
					if (!withCoils) continue;
					const coil = { name: `Coil ${made}`, note: '', target: targetTurns, lookEvery: 500, toleranceTurns: 5 };
					await addCoil(trx, id, { ...coil, direction: 'counter-clockwise', topFaces: 'out' }, { createdBy: null });
				}
				return winders;
			})
	};
}
