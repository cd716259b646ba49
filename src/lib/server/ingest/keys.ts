import { randomBytes } from 'node:crypto';
import { canonicalId } from '../db/ids.ts';
import type { Db } from '../db/schema.ts';
import { findLinkKey, hashLinkKey } from '../db/winders.ts';
import type { WinderRef } from './types.ts';

/** A key is looked up this often while its winder sends; the operator's command may revoke one beside this server. */
const trustMsMax = 5_000;
/** Keys remembered at once; each is two ids. */
const keysMax = 1_000;
/** A ticket is asked for by a page and used by it at once. */
const ticketMsMax = 30_000;
const ticketsMax = 1_000;

/** Who sends: by a winder's link key, or by a one-use ticket that a person's page asked for. */
export class LinkKeys {
	readonly #db: Db;
	readonly #now: () => number;
	readonly #known = new Map<string, { ref: WinderRef; until: number }>();
	readonly #tickets = new Map<string, { ref: WinderRef; until: number }>();

	constructor(db: Db, now: () => number = Date.now) {
		this.#db = db;
		this.#now = now;
	}

	/** null: no winder has this key. Throws when the database cannot be asked and the key was not known before. */
	async find(linkKey: string): Promise<WinderRef | null> {
		const hash = hashLinkKey(linkKey).toString('base64');
		const known = this.#known.get(hash);
		if (known && known.until > this.#now()) return known.ref;
		let ref: WinderRef | null;
		try {
			ref = await findLinkKey(this.#db, linkKey);
		} catch (error) {
			// With the database away a winder that was known goes on being counted.
			if (known) return known.ref;
			throw error;
		}
		this.#known.delete(hash);
		if (!ref) return null;
		if (this.#known.size >= keysMax) this.#known.delete(this.#known.keys().next().value as string);
		this.#known.set(hash, { ref, until: this.#now() + trustMsMax });
		return ref;
	}

	/** Keys of this winder are looked up anew. */
	forget(winderId: string): void {
		for (const [hash, known] of this.#known) if (known.ref.winderId === canonicalId(winderId)) this.#known.delete(hash);
	}

	/** A ticket for one link within half a minute. */
	mintTicket(ref: WinderRef): { ticket: string; expiresInMs: number } {
		const now = this.#now();
		for (const [ticket, held] of this.#tickets) if (held.until <= now) this.#tickets.delete(ticket);
		if (this.#tickets.size >= ticketsMax) this.#tickets.delete(this.#tickets.keys().next().value as string);
		const ticket = randomBytes(32).toString('base64url');
		this.#tickets.set(ticket, { ref, until: now + ticketMsMax });
		return { ticket, expiresInMs: ticketMsMax };
	}

	/** null: unknown, used or too old. */
	takeTicket(ticket: string): WinderRef | null {
		const held = this.#tickets.get(ticket);
		this.#tickets.delete(ticket);
		return held && held.until > this.#now() ? held.ref : null;
	}
}

/** The key of an `Authorization: Bearer …` header; null: there is none. */
export function bearerOf(header: string | null | undefined): string | null {
	const match = /^Bearer +([\x21-\x7e]{1,200})$/i.exec(header?.trim() ?? '');
	return match?.[1] ?? null;
}
