import pg from 'pg';
import { installQueues } from '../jobs/queue';
import { migrateToLatest } from './migrate';

/** Brings a database up to date as its owner: migrations, then the queue's tables and the right to use them. */
export async function install(ownerUrl: string): Promise<string[]> {
	const applied = await migrateToLatest(ownerUrl);
	await installQueues(ownerUrl);
	const client = new pg.Client({ connectionString: ownerUrl });
	await client.connect();
	try {
		await client.query(`
			grant select, insert, update, delete on all tables in schema queue to heddle_app, heddle_unmasked;
			grant execute on all functions in schema queue to heddle_app, heddle_unmasked`);
	} finally {
		await client.end();
	}
	return applied;
}
