import { afterAll, beforeEach, beforeAll, describe, expect, it } from 'vitest';
import { hashPassword, verifyPassword } from '../../src/lib/server/auth/passwords.ts';
import { hashToken, newToken } from '../../src/lib/server/auth/tokens.ts';
import { usualUnits } from '../../src/lib/coil/units.ts';
import { inWorkshop } from '../../src/lib/server/db/connect.ts';
import {
	addPerson,
	changeName,
	changeRole,
	choosePassword,
	findLinkHolder,
	findMember,
	findSignIn,
	listPeople,
	newPasswordLink,
	removePerson,
	setPassword,
	signOutEverywhere,
	type SessionClaims
} from '../../src/lib/server/db/people.ts';
import type { Role } from '../../src/lib/server/db/schema.ts';
import { setUnits } from '../../src/lib/server/db/units.ts';
import { freshDatabase, type TestDatabase } from './harness.ts';

let db: TestDatabase;
let workshop: string;
let other: string;
let made = 0;

async function makeWorkshop(): Promise<string> {
	const short_name = `w${made++}`;
	const row = await db.owner
		.insertInto('workshop')
		.values({ short_name, name: 'Hollow Lane workshop', time_zone: 'Europe/London' })
		.returning('id')
		.executeTakeFirstOrThrow();
	return row.id;
}

interface Joined {
	id: string;
	email: string;
	linkHash: Buffer;
}

async function join(workshopId: string, role: Role, name = 'Bo Reed'): Promise<Joined> {
	const email = `p${made++}@hollow-lane.example`;
	const { hash } = newToken();
	const added = await addPerson(db.app, workshopId, { name, email, role }, hash);
	if (!added.ok) throw new Error(added.why);
	return { id: added.memberId, email, linkHash: hash };
}

/** What a session opened at this moment would claim. */
async function claimsOf(person: Joined): Promise<SessionClaims> {
	const found = await findSignIn(db.app, person.email);
	if (!found) throw new Error('nobody signs in under this address');
	return { workshopId: found.workshopId, memberId: found.memberId, epoch: found.epoch };
}

beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(async () => {
	await db.drop();
});
beforeEach(async () => {
	workshop = await makeWorkshop();
	other = await makeWorkshop();
});

describe('a session', () => {
	it('with an address no record can hold finds nobody', async () => {
		expect(await findSignIn(db.app, 'ada\u0000@hollow-lane.example')).toBeNull();
	});

	it('finds its member with the workshop’s name and zone, and units', async () => {
		const ada = await join(workshop, 'owner', 'Ada Quill');
		expect(await findMember(db.app, await claimsOf(ada))).toEqual({
			workshopId: workshop,
			id: ada.id,
			name: 'Ada Quill',
			role: 'owner',
			email: ada.email,
			workshopName: 'Hollow Lane workshop',
			timeZone: 'Europe/London',
			units: usualUnits
		});
	});
	it('shows values in the units its member chose, and in the usual ones where what is stored is none', async () => {
		const ada = await join(workshop, 'owner', 'Ada Quill');
		const chosen = { ...usualUnits, length: 'inch', mass: 'ounce' } as const;
		await inWorkshop(db.app, workshop, (trx) => setUnits(trx, workshop, ada.id, chosen));
		expect((await findMember(db.app, await claimsOf(ada)))?.units).toEqual(chosen);
		await db.owner
			.updateTable('member')
			.set({ units: JSON.stringify({ length: 'ell' }) })
			.where('id', '=', ada.id)
			.execute();
		expect((await findMember(db.app, await claimsOf(ada)))?.units).toEqual(usualUnits);
	});
	it('of one workshop finds nobody when it claims another', async () => {
		const claims = await claimsOf(await join(workshop, 'owner'));
		expect(await findMember(db.app, { ...claims, workshopId: other })).toBeNull();
	});
	it('has the new role at its next request', async () => {
		await join(workshop, 'owner');
		const bo = await join(workshop, 'maker');
		const claims = await claimsOf(bo);
		expect(await changeRole(db.app, workshop, bo.id, 'apprentice')).toEqual({ ok: true });
		expect((await findMember(db.app, claims))?.role).toBe('apprentice');
	});
	it('ends with sign-out everywhere, and nobody else’s does', async () => {
		const [ada, bo] = [await join(workshop, 'owner'), await join(workshop, 'maker')];
		const [adas, bos] = [await claimsOf(ada), await claimsOf(bo)];
		await signOutEverywhere(db.app, workshop, bo.id);
		expect(await findMember(db.app, bos)).toBeNull();
		expect(await findMember(db.app, adas)).not.toBeNull();
		expect(await findMember(db.app, await claimsOf(bo))).not.toBeNull();
	});
	it('ends with a new password', async () => {
		const bo = await join(workshop, 'maker');
		const claims = await claimsOf(bo);
		expect(await setPassword(db.app, workshop, bo.id, 'hash')).toBe(true);
		expect(await findMember(db.app, claims)).toBeNull();
	});
	it('outlives a new name', async () => {
		const bo = await join(workshop, 'maker');
		const claims = await claimsOf(bo);
		await changeName(db.app, workshop, bo.id, 'Bo Reed-Marsh');
		expect((await findMember(db.app, claims))?.name).toBe('Bo Reed-Marsh');
	});
	it('ends with removal, and the address signs in no more', async () => {
		await join(workshop, 'owner');
		const bo = await join(workshop, 'maker');
		const claims = await claimsOf(bo);
		expect(await removePerson(db.app, workshop, bo.id)).toEqual({ ok: true });
		expect(await findMember(db.app, claims)).toBeNull();
		expect(await findSignIn(db.app, bo.email)).toBeNull();
		expect((await listPeople(db.app, workshop)).map(({ id }) => id)).not.toContain(bo.id);
	});
});

describe('a password link', () => {
	it('leads to its person', async () => {
		const bo = await join(workshop, 'maker');
		expect(await findLinkHolder(db.app, bo.linkHash)).toMatchObject({
			workshopId: workshop,
			memberId: bo.id,
			name: 'Bo Reed',
			email: bo.email,
			workshopName: 'Hollow Lane workshop'
		});
	});
	it('is stored hashed: the token itself stands nowhere', async () => {
		const bo = await join(workshop, 'maker');
		const { token, hash } = newToken();
		await newPasswordLink(db.app, workshop, bo.id, hash);
		const rows = await db.owner.selectFrom('password_link').selectAll().where('member_id', '=', bo.id).execute();
		expect(rows).toHaveLength(1);
		expect(rows[0]!.token_hash.equals(hashToken(token))).toBe(true);
		expect(JSON.stringify(rows)).not.toContain(token);
	});
	it('sets the password that then signs in', async () => {
		const bo = await join(workshop, 'maker');
		const password = 'copper kettle on the hob';
		expect(await choosePassword(db.app, { workshopId: workshop }, bo.linkHash, await hashPassword(password))).toBe(
			true
		);
		const found = await findSignIn(db.app, bo.email.toUpperCase());
		expect(await verifyPassword(found!.passwordHash, password)).toBe(true);
	});
	it('works once', async () => {
		const bo = await join(workshop, 'maker');
		await choosePassword(db.app, { workshopId: workshop }, bo.linkHash, 'first');
		expect(await choosePassword(db.app, { workshopId: workshop }, bo.linkHash, 'second')).toBe(false);
		expect(await findLinkHolder(db.app, bo.linkHash)).toBeNull();
		expect((await findSignIn(db.app, bo.email))?.passwordHash).toBe('first');
	});
	it('works once when opened many times at the same moment', async () => {
		const bo = await join(workshop, 'maker');
		const tries = Array.from({ length: 8 }, (_, i) =>
			choosePassword(db.app, { workshopId: workshop }, bo.linkHash, `hash ${i}`)
		);
		expect((await Promise.all(tries)).filter(Boolean)).toHaveLength(1);
	});
	it('is good for seven days and not a moment longer', async () => {
		const bo = await join(workshop, 'maker');
		const [row] = await db.owner.selectFrom('password_link').selectAll().where('member_id', '=', bo.id).execute();
		expect(Number(row!.expires_at) - Number(row!.created_at)).toBe(7 * 24 * 3600_000);
		await db.owner
			.updateTable('password_link')
			.set({ expires_at: row!.created_at })
			.where('member_id', '=', bo.id)
			.execute();
		expect(await findLinkHolder(db.app, bo.linkHash)).toBeNull();
		expect(await choosePassword(db.app, { workshopId: workshop }, bo.linkHash, 'late')).toBe(false);
	});
	it('ends the one made before it', async () => {
		const bo = await join(workshop, 'maker');
		const { hash } = newToken();
		expect(await newPasswordLink(db.app, workshop, bo.id, hash)).toEqual({ ok: true });
		expect(await findLinkHolder(db.app, bo.linkHash)).toBeNull();
		expect(await findLinkHolder(db.app, hash)).not.toBeNull();
	});
	it('ends the sessions of the old password when used, not when made', async () => {
		const bo = await join(workshop, 'maker');
		await choosePassword(db.app, { workshopId: workshop }, bo.linkHash, 'old');
		const claims = await claimsOf(bo);
		const { hash } = newToken();
		await newPasswordLink(db.app, workshop, bo.id, hash);
		expect(await findMember(db.app, claims)).not.toBeNull();
		await choosePassword(db.app, { workshopId: workshop }, hash, 'new');
		expect(await findMember(db.app, claims)).toBeNull();
	});
	it('of someone removed leads nowhere', async () => {
		await join(workshop, 'owner');
		const bo = await join(workshop, 'maker');
		await removePerson(db.app, workshop, bo.id);
		expect(await findLinkHolder(db.app, bo.linkHash)).toBeNull();
		expect(await choosePassword(db.app, { workshopId: workshop }, bo.linkHash, 'hash')).toBe(false);
	});
});

describe('the last owner', () => {
	it('can be neither removed nor made a maker', async () => {
		const ada = await join(workshop, 'owner');
		await join(workshop, 'maker');
		expect(await removePerson(db.app, workshop, ada.id)).toEqual({ ok: false, why: 'last-owner' });
		expect(await changeRole(db.app, workshop, ada.id, 'maker')).toEqual({ ok: false, why: 'last-owner' });
		expect(await changeRole(db.app, workshop, ada.id, 'owner')).toEqual({ ok: true });
		expect((await findMember(db.app, await claimsOf(ada)))?.role).toBe('owner');
	});
	it('of one workshop is not saved by the owner of another', async () => {
		const ada = await join(workshop, 'owner');
		await join(other, 'owner');
		expect(await removePerson(db.app, workshop, ada.id)).toEqual({ ok: false, why: 'last-owner' });
	});
	it('remains when two owners demote each other at the same moment', async () => {
		for (let round = 0; round < 10; round++) {
			const at = await makeWorkshop();
			const [ada, bo] = [await join(at, 'owner'), await join(at, 'owner')];
			await Promise.all([changeRole(db.app, at, ada.id, 'maker'), removePerson(db.app, at, bo.id)]);
			const owners = (await listPeople(db.app, at)).filter(({ role }) => role === 'owner');
			expect(owners).toHaveLength(1);
		}
	});
});

describe('people of a workshop', () => {
	it('are listed by role and name, with whether they chose a password', async () => {
		const bo = await join(workshop, 'apprentice');
		const ada = await join(workshop, 'owner', 'Ada Quill');
		await join(other, 'owner', 'Cy Marsh');
		await choosePassword(db.app, { workshopId: workshop }, ada.linkHash, 'hash');
		const people = await listPeople(db.app, workshop);
		expect(people).toMatchObject([
			{ id: ada.id, name: 'Ada Quill', role: 'owner', hasPassword: true, linkExpiresAt: null },
			{ id: bo.id, name: 'Bo Reed', role: 'apprentice', hasPassword: false, linkExpiresAt: expect.any(Date) }
		]);
	});
	it('an address works in one workshop alone', async () => {
		const bo = await join(workshop, 'maker');
		for (const at of [workshop, other]) {
			const again = await addPerson(db.app, at, { name: 'Bo', email: bo.email, role: 'maker' }, newToken().hash);
			expect(again).toEqual({ ok: false, why: 'email-taken' });
		}
		expect(await listPeople(db.app, other)).toEqual([]);
	});
	it('someone removed comes back as the same person, with neither password nor session of then', async () => {
		await join(workshop, 'owner');
		const bo = await join(workshop, 'maker');
		await choosePassword(db.app, { workshopId: workshop }, bo.linkHash, 'old');
		const claims = await claimsOf(bo);
		await removePerson(db.app, workshop, bo.id);
		const { hash } = newToken();
		const back = await addPerson(
			db.app,
			workshop,
			{ name: 'Bo Reed', email: bo.email.toUpperCase(), role: 'apprentice' },
			hash
		);
		expect(back).toEqual({ ok: true, memberId: bo.id, cameBack: true });
		expect(await findMember(db.app, claims)).toBeNull();
		expect((await findSignIn(db.app, bo.email))?.passwordHash).toBeNull();
		expect(await findLinkHolder(db.app, hash)).toMatchObject({ memberId: bo.id });
	});
	it('someone removed may join another workshop, and then not come back here', async () => {
		await join(workshop, 'owner');
		const bo = await join(workshop, 'maker');
		await removePerson(db.app, workshop, bo.id);
		const person = { name: 'Bo Reed', email: bo.email, role: 'maker' as const };
		expect(await addPerson(db.app, other, person, newToken().hash)).toMatchObject({ ok: true, cameBack: false });
		expect(await addPerson(db.app, workshop, person, newToken().hash)).toEqual({ ok: false, why: 'email-taken' });
	});
	it('another workshop’s person is nobody here: not found, nothing changed', async () => {
		await join(workshop, 'owner');
		const theirs = await join(other, 'maker');
		const claims = await claimsOf(theirs);
		const notFound = { ok: false, why: 'not-found' };
		expect(await changeRole(db.app, workshop, theirs.id, 'owner')).toEqual(notFound);
		expect(await removePerson(db.app, workshop, theirs.id)).toEqual(notFound);
		expect(await newPasswordLink(db.app, workshop, theirs.id, newToken().hash)).toEqual(notFound);
		expect(await setPassword(db.app, workshop, theirs.id, 'hash')).toBe(false);
		await changeName(db.app, workshop, theirs.id, 'Nobody');
		await signOutEverywhere(db.app, workshop, theirs.id);
		expect(await findMember(db.app, claims)).toMatchObject({ name: 'Bo Reed', role: 'maker' });
		expect(await findLinkHolder(db.app, theirs.linkHash)).not.toBeNull();
	});
});
