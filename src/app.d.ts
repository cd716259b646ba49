import type { Db } from '$lib/server/db/schema.ts';
import type { Member } from '$lib/server/db/people.ts';
import type { Session } from '@auth/sveltekit';

declare global {
	namespace App {
		interface Error {
			message: string;
			/** Under which the log tells more; only for failures of ours. */
			id?: string;
		}
		interface Locals {
			/** Who is signed in, as the database knew them when the request came; null: nobody. */
			member: Member | null;
			/** The pool as turnstead_app; scoped work goes through inWorkshop. */
			db: Db;
			/** Auth.js's own; use `member`. */
			auth: () => Promise<Session | null>;
		}
	}
}

export {};
