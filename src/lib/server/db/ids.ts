const uuid = /^[0-9a-f]{8}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{12}$/i;

/** Ids come from addresses and bodies; PostgreSQL would raise an error on what is no UUID, where the answer is "not found". */
export function isUuid(text: string): boolean {
	return uuid.test(text);
}
