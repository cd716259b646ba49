import type { LayoutServerLoad } from './$types';
import { guard } from '$lib/server/auth/guard';
import { may, type Action } from '$lib/server/auth/may';

/** What a page asks before it shows a button; the server asks again before it does the thing. */
const shown = [
	'queue.change',
	'book.note',
	'winder.see',
	'winder.change',
	'people.change',
	'workshop.change'
] as const satisfies Action[];

export const load: LayoutServerLoad = ({ locals }) => {
	const member = guard(locals, 'me.change');
	return {
		member: {
			id: member.id,
			name: member.name,
			role: member.role,
			email: member.email,
			workshopName: member.workshopName,
			timeZone: member.timeZone
		},
		may: Object.fromEntries(shown.map((action) => [action, may(member.role, action)])) as Record<
			(typeof shown)[number],
			boolean
		>
	};
};
