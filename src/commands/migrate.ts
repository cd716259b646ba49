import { startEnv } from '../lib/server/env.ts';
import { projectDatabaseUrl } from './cluster.ts';
import { projectFolder } from './data-folder.ts';
import { asOwner, migrateOrSay } from './database.ts';
import { PlainError, sayAndFail } from './plain-error.ts';

/** `npm run migrate`: brings a database to this code without starting anything. `npm start` does it by itself. */

try {
	const url = startEnv().databaseUrl ?? projectDatabaseUrl(projectFolder);
	if (url === null) {
		throw new PlainError('There is no database yet. Set DATABASE_URL, or let "npm start" make one and migrate it.');
	}
	const done = await asOwner(url, migrateOrSay);
	console.log(done.length === 0 ? 'The database is as this code needs it.' : `Done: ${done.join(', ')}.`);
} catch (error) {
	sayAndFail(error);
}
