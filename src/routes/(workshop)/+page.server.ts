import { redirect } from '@sveltejs/kit';

/** The day begins at the benches. */
export function load() {
	redirect(307, '/wind');
}
