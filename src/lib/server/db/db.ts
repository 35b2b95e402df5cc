import { Kysely, PostgresDialect } from 'kysely';
import pg from 'pg';
import { config } from '$lib/server/config';
import type { Tables } from './tables';

// A date has no zone: as text it cannot shift by a day. A numeric value is a measurement: a number.
pg.types.setTypeParser(pg.types.builtins.DATE, (text) => text);
pg.types.setTypeParser(pg.types.builtins.NUMERIC, Number);
pg.types.setTypeParser(1231 as number, (text: string) =>
	text === '{}' ? [] : text.slice(1, -1).split(',').map(Number)
);

export interface Database {
	pool: pg.Pool;
	kysely: Kysely<Tables>;
	close(): Promise<void>;
}

export function openDatabase(url: string, connections = 10): Database {
	const pool = new pg.Pool({
		connectionString: url,
		max: connections,
		connectionTimeoutMillis: 10_000,
		application_name: 'heddle'
	});
	// A connection that dies while idle (the database restarted) is replaced at the next use; it must not end the process.
	pool.on('error', () => {});
	// So must one that dies while it is lent out, between two statements: whoever holds it learns of it at the next one.
	pool.on('connect', (client) => client.on('error', () => {}));
	const kysely = new Kysely<Tables>({ dialect: new PostgresDialect({ pool }) });
	return { pool, kysely: kysely.withSchema('app'), close: () => kysely.destroy() };
}

let opened: Database | undefined;

/** The process's one pool. Only the door, the session code and the queue ask for it. */
export const database = (): Database => (opened ??= openDatabase(config().databaseUrl));

/** For tests and command-line programs that bring their own. */
export function useDatabase(given: Database | undefined): void {
	opened = given;
}
