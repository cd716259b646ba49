const uuid = /^[0-9a-f]{8}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{12}$/i;

/** Ids come from addresses and bodies; PostgreSQL would raise an error on what is no UUID, where the answer is "not found". */
export function isUuid(text: string): boolean {
	return uuid.test(text);
}

/** The one spelling of an id, as PostgreSQL writes it: what is kept in memory by its id must not be there twice. */
export function canonicalId(id: string): string {
	return id.toLowerCase();
}
