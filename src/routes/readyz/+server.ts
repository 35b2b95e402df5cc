import { sql } from 'kysely';
import { database } from '$lib/server/db/db';

/** The process may be given work: the database answers and is migrated. */
export const GET = async () => {
	try {
		await sql`select set_up_at from app.installation`.execute(database().kysely);
		return new Response('ready\n', { headers: { 'content-type': 'text/plain' } });
	} catch {
		return new Response('The database is not ready.\n', {
			status: 503,
			headers: { 'content-type': 'text/plain' }
		});
	}
};
