import { randomInt } from 'node:crypto';
import { hashPassword, verifyPassword } from '../lib/server/auth/passwords.ts';
import { anyWorkshop, insertMemberWithPassword, insertWorkshop, passwordHashOf } from '../lib/server/db/admin.ts';
import { addCoil, type CoilInput } from '../lib/server/db/coils.ts';
import type { Db, Role } from '../lib/server/db/schema.ts';
import { windSpec } from '../lib/server/db/specs.ts';
import { addWinder, newLinkKey } from '../lib/server/db/winders.ts';
import { readData, writeData } from './data-folder.ts';
import { makeDemoRecord, type DemoPlace } from './demo-record.ts';

/**
 * An invented workshop for the first look at an empty database: three people, one simulated winder, specs and what was
 * wound by them, and a queue.
 */

const SIGN_INS = 'demo-sign-ins.txt';
const WINDER = 'demo-winder.json';

const people: { name: string; email: string; role: Role }[] = [
	{ name: 'Ada Quill', email: 'ada@demo.example', role: 'owner' },
	{ name: 'Tom Fenn', email: 'tom@demo.example', role: 'maker' },
	{ name: 'Ira Moss', email: 'ira@demo.example', role: 'apprentice' }
];

// Short, so that whoever watches sees the looks and the end within minutes.
const practice: CoilInput = {
	name: 'Practice coil',
	note: 'To see how the bench works.',
	target: 1200,
	lookEvery: 500,
	direction: 'counter-clockwise',
	topFaces: 'out',
	toleranceTurns: 5
};

export interface DemoWinder {
	id: string;
	name: string;
	linkKey: string;
}

/** The sign-ins as they are shown, or null where there is no demo workshop. `db` signs in as the owner. */
export async function demoSignIns(db: Db): Promise<string[] | null> {
	const kept = readData(SIGN_INS);
	return kept === null ? null : signInsNow(db, kept);
}

/** The rows as they were kept; a password that no longer signs in is left out. */
export async function signInsNow(db: Db, kept: string): Promise<string[]> {
	return Promise.all(
		kept
			.trimEnd()
			.split('\n')
			.map(async (row) => {
				const [role = '', email = '', password = ''] = row.split(/\s+/);
				const holds = await verifyPassword(await passwordHashOf(db, email), password);
				return holds ? row : `${role.padEnd(10)}  ${email}  changed since`;
			})
	);
}

/** The winder the simulator plays, or null where there is no demo workshop. */
export function demoWinder(): DemoWinder | null {
	const text = readData(WINDER);
	return text === null ? null : (JSON.parse(text) as DemoWinder);
}

/** Makes the demo workshop on a database without any workshop. `db` signs in as the owner. */
export async function ensureDemo(db: Db): Promise<'made' | 'not-needed'> {
	if (await anyWorkshop(db)) return 'not-needed';
	const signIns = await Promise.all(
		people.map(async (person) => {
			const password = newPassword();
			return { ...person, password, passwordHash: await hashPassword(password) };
		})
	);
	// All of it or nothing, the files included: a database with a demo nobody has the passwords of is of no use.
	await db.transaction().execute(async (trx) => {
		const workshopId = await insertWorkshop(trx, {
			shortName: 'demo',
			name: 'Hollow Lane workshop',
			timeZone: Intl.DateTimeFormat().resolvedOptions().timeZone
		});
		const memberIds: string[] = [];
		for (const person of signIns) memberIds.push(await insertMemberWithPassword(trx, workshopId, person));
		const added = await addWinder(trx, workshopId, {
			name: 'w-01',
			pulsesPerTurn: 1,
			rpmMax: 2000,
			seesDirection: true,
			forwardIs: 'counter-clockwise',
			easeEarlyTurns: 40,
			stopEarlyTurns: 3,
			keepAfterS: null,
			timeScale: 1
		});
		if (!added.ok) throw new Error('a new workshop has a winder already');
		const linkKey = await newLinkKey(trx, workshopId, added.winder.id);
		if (linkKey === null) throw new Error('the winder just added is not there');
		await fillDemo(trx, { workshopId, winderId: added.winder.id, memberId: memberIds[0]!, now: new Date() });
		const winder: DemoWinder = { id: added.winder.id, name: added.winder.name, linkKey };
		writeData(WINDER, `${JSON.stringify(winder)}\n`);
		writeData(SIGN_INS, signIns.map((one) => `${one.role.padEnd(10)}  ${one.email}  ${one.password}\n`).join(''));
	});
	return 'made';
}

/** What was wound, and what waits: the practice coil first, then coils of the specs. */
export async function fillDemo(trx: Parameters<typeof makeDemoRecord>[0], place: DemoPlace): Promise<void> {
	const { workshopId, memberId: by } = place;
	const { bridge, lantern } = await makeDemoRecord(trx, place);
	await addCoil(trx, workshopId, practice, { createdBy: by });
	for (const more of [{ ...bridge }, { ...lantern, no: 1 }]) {
		const queued = await windSpec(trx, workshopId, { ...more, pickups: 1, by });
		if (!queued.ok) throw new Error(`the demo's own spec is ${queued.why}`);
	}
}

// Without what looks like another letter: these are typed from one screen into another.
const LETTERS = 'abcdefghjkmnpqrstuvwxyz23456789';

/** Four groups of five: 31^20 is 99 bits. */
export function newPassword(): string {
	const group = () => Array.from({ length: 5 }, () => LETTERS[randomInt(LETTERS.length)]).join('');
	return [group(), group(), group(), group()].join('-');
}
