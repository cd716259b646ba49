import type { Role } from '$lib/server/db/schema';

export const roleOptions: { value: Role; label: string }[] = [
	{ value: 'apprentice', label: 'apprentice: the bench, and reading' },
	{ value: 'maker', label: 'maker: also the queue and the bench book' },
	{ value: 'owner', label: 'owner: also people and winders' }
];
