import { sql, type Kysely, type Transaction } from 'kysely';
import { unitPreference, usualUnits, type UnitPreference } from '../../coil/units.ts';
import { inWorkshop } from './connect.ts';
import type { Database, Role } from './schema.ts';

type Db = Kysely<Database>;

/** The person behind a request, as they are at this moment. */
export interface Member {
	workshopId: string;
	id: string;
	name: string;
	role: Role;
	email: string;
	workshopName: string;
	/** IANA name, such as Europe/Berlin; times are shown in it. */
	timeZone: string;
	/** Units this person wants values shown in. */
	units: UnitPreference;
}

/** What a session claims; true only while the epoch is the member's own. */
export interface SessionClaims {
	workshopId: string;
	memberId: string;
	epoch: number;
}

export interface SignIn extends SessionClaims {
	passwordHash: string | null;
}

export interface Person {
	id: string;
	name: string;
	email: string;
	role: Role;
	hasPassword: boolean;
	/** When the newest unused password link ends; null without one. */
	linkExpiresAt: Date | null;
}

/** A first-password link works for this long: it may be sent on a Friday and opened after the weekend. */
export const passwordLinkDays = 7;

/** An address as it is stored and compared. */
export function normaliseEmail(typed: string): string {
	return typed.trim().normalize('NFC').toLowerCase();
}

/** Looks an address up before the workshop is known. Null: nobody works here under it. */
export async function findSignIn(db: Db, email: string): Promise<SignIn | null> {
	// PostgreSQL raises an error on a NUL, and nobody has one in an address.
	if (email.includes('\0')) return null;
	const { rows } = await sql<{
		workshop_id: string;
		member_id: string;
		password_hash: string | null;
		session_epoch: number;
	}>`select workshop_id, member_id, password_hash, session_epoch from find_sign_in(${normaliseEmail(email)})`.execute(
		db
	);
	const row = rows[0];
	if (!row) return null;
	return {
		workshopId: row.workshop_id,
		memberId: row.member_id,
		epoch: row.session_epoch,
		passwordHash: row.password_hash
	};
}

/** The member a session speaks of, or null once they were removed or the session was ended. */
export async function findMember(db: Db, claims: SessionClaims): Promise<Member | null> {
	const row = await inWorkshop(db, claims.workshopId, (trx) =>
		trx
			.selectFrom('member as m')
			.innerJoin('workshop as w', 'w.id', 'm.workshop_id')
			.select(['m.name', 'm.role', 'm.email', 'm.units', 'w.name as workshop_name', 'w.time_zone'])
			.where('m.workshop_id', '=', claims.workshopId)
			.where('m.id', '=', claims.memberId)
			.where('m.session_epoch', '=', claims.epoch)
			.where('m.removed_at', 'is', null)
			.executeTakeFirst()
	);
	if (!row) return null;
	return {
		workshopId: claims.workshopId,
		id: claims.memberId,
		name: row.name,
		role: row.role,
		email: row.email,
		workshopName: row.workshop_name,
		timeZone: row.time_zone,
		// One choice more or less than this version knows is no reason to keep somebody out.
		units: unitPreference.safeParse(row.units).data ?? usualUnits
	};
}

export async function listPeople(db: Db, workshopId: string): Promise<Person[]> {
	const rows = await inWorkshop(db, workshopId, (trx) =>
		trx
			.selectFrom('member as m')
			.select((eb) => [
				'm.id',
				'm.name',
				'm.email',
				'm.role',
				eb('m.password_hash', 'is not', null).as('has_password'),
				eb
					.selectFrom('password_link as p')
					.select((p) => p.fn.max('p.expires_at').as('expires_at'))
					.where('p.workshop_id', '=', workshopId)
					.whereRef('p.member_id', '=', 'm.id')
					.where('p.used_at', 'is', null)
					.where('p.expires_at', '>', sql<Date>`now()`)
					.as('link_expires_at')
			])
			.where('m.workshop_id', '=', workshopId)
			.where('m.removed_at', 'is', null)
			.orderBy(sql`array_position(array['owner', 'maker', 'apprentice'], m.role)`)
			.orderBy('m.name')
			.orderBy('m.id')
			.execute()
	);
	return rows.map((row) => ({
		id: row.id,
		name: row.name,
		email: row.email,
		role: row.role,
		hasPassword: Boolean(row.has_password),
		linkExpiresAt: row.link_expires_at
	}));
}

export interface NewPerson {
	name: string;
	email: string;
	role: Role;
}

export type Added = { ok: true; memberId: string; cameBack: boolean } | { ok: false; why: 'email-taken' };

/**
 * Adds a person and stores the hash of their first-password link. Someone who was here before comes back as the same
 * person, so that old runs stay theirs, but with neither password nor session of then.
 */
export async function addPerson(db: Db, workshopId: string, person: NewPerson, linkHash: Buffer): Promise<Added> {
	const email = normaliseEmail(person.email);
	try {
		return await inWorkshop(db, workshopId, async (trx) => {
			const gone = await trx
				.updateTable('member')
				.set((eb) => ({
					name: person.name,
					role: person.role,
					password_hash: null,
					session_epoch: eb('session_epoch', '+', 1),
					removed_at: null
				}))
				.where('workshop_id', '=', workshopId)
				.where('id', '=', (eb) =>
					eb
						.selectFrom('member as old')
						.select('old.id')
						.where('old.workshop_id', '=', workshopId)
						.where('old.email', '=', email)
						.where('old.removed_at', 'is not', null)
						.orderBy('old.removed_at', 'desc')
						.limit(1)
				)
				.returning('id')
				.executeTakeFirst();
			const memberId =
				gone?.id ??
				(
					await trx
						.insertInto('member')
						.values({ workshop_id: workshopId, email, name: person.name, role: person.role })
						.returning('id')
						.executeTakeFirstOrThrow()
				).id;
			await replaceLink(trx, workshopId, memberId, linkHash);
			return { ok: true, memberId, cameBack: gone !== undefined };
		});
	} catch (cause) {
		if (isUniqueViolation(cause)) return { ok: false, why: 'email-taken' };
		throw cause;
	}
}

/** Changing or removing someone: unknown and foreign ids are `not-found`; a workshop always keeps an owner. */
export type Changed = { ok: true } | { ok: false; why: 'not-found' | 'last-owner' };

/** The role acts at the person's next request. */
export function changeRole(db: Db, workshopId: string, memberId: string, role: Role): Promise<Changed> {
	return inWorkshop(db, workshopId, async (trx) => {
		if (role !== 'owner' && (await isLastOwner(trx, workshopId, memberId))) return { ok: false, why: 'last-owner' };
		const changed = await trx
			.updateTable('member')
			.set({ role })
			.where('workshop_id', '=', workshopId)
			.where('id', '=', memberId)
			.where('removed_at', 'is', null)
			.returning('id')
			.executeTakeFirst();
		return changed ? { ok: true } : { ok: false, why: 'not-found' };
	});
}

/** Ends the person's sessions and links. Their name stays on what they did. */
export function removePerson(db: Db, workshopId: string, memberId: string): Promise<Changed> {
	return inWorkshop(db, workshopId, async (trx) => {
		if (await isLastOwner(trx, workshopId, memberId)) return { ok: false, why: 'last-owner' };
		const removed = await trx
			.updateTable('member')
			.set((eb) => ({
				removed_at: sql<Date>`now()`,
				password_hash: null,
				session_epoch: eb('session_epoch', '+', 1)
			}))
			.where('workshop_id', '=', workshopId)
			.where('id', '=', memberId)
			.where('removed_at', 'is', null)
			.returning('id')
			.executeTakeFirst();
		if (!removed) return { ok: false, why: 'not-found' };
		await dropUnusedLinks(trx, workshopId, memberId);
		return { ok: true };
	});
}

/** Stores a new link and drops the unused ones before it, so that the newest is the only one that works. */
export function newPasswordLink(db: Db, workshopId: string, memberId: string, linkHash: Buffer): Promise<Changed> {
	return inWorkshop(db, workshopId, async (trx) => {
		const here = await trx
			.selectFrom('member')
			.select('id')
			.where('workshop_id', '=', workshopId)
			.where('id', '=', memberId)
			.where('removed_at', 'is', null)
			.forUpdate()
			.executeTakeFirst();
		if (!here) return { ok: false, why: 'not-found' };
		await replaceLink(trx, workshopId, memberId, linkHash);
		return { ok: true };
	});
}

export interface LinkHolder {
	workshopId: string;
	memberId: string;
	name: string;
	email: string;
	workshopName: string;
	workshopShortName: string;
}

/** Who may choose a password with this link; null when it is unknown, used, too old, or its person was removed. */
export async function findLinkHolder(db: Db, linkHash: Buffer): Promise<LinkHolder | null> {
	const { rows } = await sql<{
		workshop_id: string;
		member_id: string;
	}>`select workshop_id, member_id from find_password_link(${linkHash})`.execute(db);
	const found = rows[0];
	if (!found) return null;
	const row = await inWorkshop(db, found.workshop_id, (trx) =>
		trx
			.selectFrom('member as m')
			.innerJoin('workshop as w', 'w.id', 'm.workshop_id')
			.select(['m.name', 'm.email', 'm.units', 'w.name as workshop_name', 'w.short_name'])
			.where('m.workshop_id', '=', found.workshop_id)
			.where('m.id', '=', found.member_id)
			.where('m.removed_at', 'is', null)
			.executeTakeFirst()
	);
	if (!row) return null;
	return {
		workshopId: found.workshop_id,
		memberId: found.member_id,
		name: row.name,
		email: row.email,
		workshopName: row.workshop_name,
		workshopShortName: row.short_name
	};
}

/**
 * Uses the link up and sets the password; sessions opened with an older password end. False when the link was used in
 * the meantime: of two that try at once, the row's lock lets one through.
 */
export function choosePassword(
	db: Db,
	holder: Pick<LinkHolder, 'workshopId'>,
	linkHash: Buffer,
	passwordHash: string
): Promise<boolean> {
	return inWorkshop(db, holder.workshopId, async (trx) => {
		const used = await trx
			.updateTable('password_link')
			.set({ used_at: sql<Date>`now()` })
			.where('workshop_id', '=', holder.workshopId)
			.where('token_hash', '=', linkHash)
			.where('used_at', 'is', null)
			.where('expires_at', '>', sql<Date>`now()`)
			.returning('member_id')
			.executeTakeFirst();
		if (!used) return false;
		return setHash(trx, holder.workshopId, used.member_id, passwordHash);
	});
}

/**
 * Sets the password and ends every session of the member; unused links end too. False when the person is not here.
 * The caller has checked the old password, or is the operator.
 */
export function setPassword(db: Db, workshopId: string, memberId: string, passwordHash: string): Promise<boolean> {
	return inWorkshop(db, workshopId, (trx) => setHash(trx, workshopId, memberId, passwordHash));
}

export async function changeName(db: Db, workshopId: string, memberId: string, name: string): Promise<void> {
	await inWorkshop(db, workshopId, (trx) =>
		trx
			.updateTable('member')
			.set({ name })
			.where('workshop_id', '=', workshopId)
			.where('id', '=', memberId)
			.where('removed_at', 'is', null)
			.execute()
	);
}

/** Every session of this member ends at its next request, the one that asks included. */
export async function signOutEverywhere(db: Db, workshopId: string, memberId: string): Promise<void> {
	await inWorkshop(db, workshopId, (trx) =>
		trx
			.updateTable('member')
			.set((eb) => ({ session_epoch: eb('session_epoch', '+', 1) }))
			.where('workshop_id', '=', workshopId)
			.where('id', '=', memberId)
			.execute()
	);
}

async function setHash(
	trx: Transaction<Database>,
	workshopId: string,
	memberId: string,
	passwordHash: string
): Promise<boolean> {
	const set = await trx
		.updateTable('member')
		.set((eb) => ({ password_hash: passwordHash, session_epoch: eb('session_epoch', '+', 1) }))
		.where('workshop_id', '=', workshopId)
		.where('id', '=', memberId)
		.where('removed_at', 'is', null)
		.returning('id')
		.executeTakeFirst();
	if (!set) return false;
	await dropUnusedLinks(trx, workshopId, memberId);
	return true;
}

async function replaceLink(
	trx: Transaction<Database>,
	workshopId: string,
	memberId: string,
	linkHash: Buffer
): Promise<void> {
	await dropUnusedLinks(trx, workshopId, memberId);
	await trx
		.insertInto('password_link')
		.values({
			workshop_id: workshopId,
			member_id: memberId,
			token_hash: linkHash,
			expires_at: sql<Date>`now() + make_interval(days => ${passwordLinkDays})`
		})
		.execute();
}

async function dropUnusedLinks(trx: Transaction<Database>, workshopId: string, memberId: string): Promise<void> {
	await trx
		.deleteFrom('password_link')
		.where('workshop_id', '=', workshopId)
		.where('member_id', '=', memberId)
		.where('used_at', 'is', null)
		.execute();
}

/** Locks the owners in one order, so that two owners who demote each other at once leave one. */
async function isLastOwner(trx: Transaction<Database>, workshopId: string, memberId: string): Promise<boolean> {
	const owners = await trx
		.selectFrom('member')
		.select('id')
		.where('workshop_id', '=', workshopId)
		.where('role', '=', 'owner')
		.where('removed_at', 'is', null)
		.orderBy('id')
		.forUpdate()
		.execute();
	return owners.length === 1 && owners[0]!.id === memberId;
}

function isUniqueViolation(cause: unknown): boolean {
	return cause instanceof Error && 'code' in cause && cause.code === '23505';
}
