import type { LayoutServerLoad } from './$types';
import { guard } from '$lib/server/auth/guard';
import { may, type Action } from '$lib/server/auth/may';
import { countWaiting } from '$lib/server/db/coils';
import { inWorkshop } from '$lib/server/db/connect';

/** What a page asks before it shows a button; the server asks again before it does the thing. */
const shown = [
	'queue.change',
	'book.note',
	'winder.see',
	'winder.change',
	'people.change',
	'workshop.change',
	'spec.see',
	'spec.change',
	'spool.see',
	'spool.change',
	'meter.change',
	'reading.add',
	'reading.strike'
] as const satisfies Action[];

export const load: LayoutServerLoad = async ({ locals, depends }) => {
	depends('wind:now');
	const member = guard(locals, 'me.change');
	return {
		member: {
			id: member.id,
			name: member.name,
			role: member.role,
			email: member.email,
			workshopName: member.workshopName,
			timeZone: member.timeZone,
			units: member.units
		},
		waiting: await inWorkshop(locals.db, member.workshopId, (trx) => countWaiting(trx, member.workshopId)),
		may: Object.fromEntries(shown.map((action) => [action, may(member.role, action)])) as Record<
			(typeof shown)[number],
			boolean
		>
	};
};
