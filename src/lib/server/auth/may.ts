import type { Role } from '../db/schema.ts';

/** Who acts: a person by role, or a winder by its own link key. */
export type Actor = Role | 'winder';

const everyone = ['owner', 'maker', 'apprentice'] as const;
const makers = ['owner', 'maker'] as const;
const owners = ['owner'] as const;

/**
 * The one place that says who may do what. An apprentice works at the bench and reads; what gets wound and what the
 * record says about it is a maker's; people, winders and the workshop itself are the owner's.
 */
const allowed = {
	/** Their own name, password and sessions. */
	'me.change': everyone,
	'bench.see': everyone,
	'bench.tap': everyone,
	'queue.see': everyone,
	'queue.change': makers,
	'book.read': everyone,
	'book.note': makers,
	'spec.see': everyone,
	'spec.change': makers,
	'spool.see': everyone,
	'spool.change': makers,
	'meter.change': makers,
	/** Whoever holds the meter writes down what it shows; what is wrong in the record a maker strikes out. */
	'reading.add': everyone,
	'reading.strike': makers,
	/** The page of a winder with its link and its lines; never its key. */
	'winder.see': makers,
	/** Add, set, remove; make or revoke a link key. */
	'winder.change': owners,
	'people.change': owners,
	'workshop.change': owners,
	'lines.send': ['winder'],
	'live.read': [...everyone, 'winder']
} as const satisfies Record<string, readonly Actor[]>;

export type Action = keyof typeof allowed;

export const actions = Object.keys(allowed) as Action[];

export function may(actor: Actor, action: Action): boolean {
	return (allowed[action] as readonly Actor[]).includes(actor);
}
