import type { FreshDatabase } from './database';

/**
 * Seals until nothing is left unsealed. Transaction ids are the whole cluster's: a transaction of another test, begun
 * earlier, holds the newest events back until it is over.
 */
export async function sealAll(database: FreshDatabase): Promise<void> {
	for (let tries = 0; tries < 600; tries++) {
		const [, rows] = await database.sql(
			'select audit.seal_now()',
			`select count(*)::int as unsealed from audit.event e left join audit.sealed s on s.event_id = e.id
				where s.event_id is null`
		);
		if (rows?.[0]?.unsealed === 0) return;
		await new Promise((resolve) => setTimeout(resolve, 50));
	}
	throw new Error('The trail could not be sealed: a transaction in this cluster does not end.');
}
