/** Which revision an address means: `2` is one of this spec's own, `<spec>:2` another's. */
export interface Asked {
	/** null: this spec. */
	spec: string | null;
	no: number;
}

/** null: no revision can be meant by it. */
export function readAsked(text: string): Asked | null {
	const found = /^(?:([0-9a-f-]{36}):)?([1-9]\d{0,4})$/i.exec(text);
	return found ? { spec: found[1] ?? null, no: Number(found[2]) } : null;
}

/** The address of a revision of the spec `own`; its own revisions stand by their number alone. */
export const writeAsked = (own: string, specId: string, no: number): string =>
	specId === own ? String(no) : `${specId}:${no}`;
