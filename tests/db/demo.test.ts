import { afterAll, beforeAll, expect, it } from 'vitest';
import { signInsNow } from '../../src/commands/demo.ts';
import { hashPassword } from '../../src/lib/server/auth/passwords.ts';
import { insertMemberWithPassword, insertWorkshop } from '../../src/lib/server/db/admin.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db.drop());

it('a demo password that was changed, or whose person is gone, is not shown again', async () => {
	const workshopId = await insertWorkshop(db.owner, {
		shortName: 'demo',
		name: 'Hollow Lane workshop',
		timeZone: 'UTC'
	});
	const person = async (name: string, password: string) =>
		insertMemberWithPassword(db.owner, workshopId, {
			name,
			email: `${name.toLowerCase()}@demo.example`,
			role: 'maker',
			passwordHash: await hashPassword(password)
		});
	await person('Ada', 'spools-of-thin-red-wire');
	await person('Tom', 'a-later-sentence-of-his-own');
	const gone = await person('Ira', 'brushes-and-warm-wax');
	await db.owner.updateTable('member').set({ removed_at: new Date() }).where('id', '=', gone).execute();
	const kept = [
		'owner       ada@demo.example  spools-of-thin-red-wire',
		'maker       tom@demo.example  the-first-sentence-he-had',
		'apprentice  ira@demo.example  brushes-and-warm-wax'
	];
	expect(await signInsNow(db.owner, `${kept.join('\n')}\n`)).toEqual([
		kept[0],
		'maker       tom@demo.example  changed since',
		'apprentice  ira@demo.example  changed since'
	]);
});
