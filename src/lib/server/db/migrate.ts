import { Kysely, Migrator, PostgresDialect, type Migration, type MigrationProvider } from 'kysely';
import pg from 'pg';

const modules = import.meta.glob<Migration>('../../../../migrations/*.ts', { eager: true });

const nameOf = (path: string) => path.slice(path.lastIndexOf('/') + 1).replace(/\.ts$/, '');

const provider: MigrationProvider = {
	getMigrations: async () =>
		Object.fromEntries(Object.entries(modules).map(([path, module]) => [nameOf(path), module]))
};

export class MigrationFailed extends Error {
	constructor(
		readonly migration: string | null,
		readonly applied: string[],
		cause: unknown
	) {
		const why = cause instanceof Error ? cause.message : String(cause);
		super(migration ? `Migration ${migration} failed: ${why}` : `Migrations failed: ${why}`, {
			cause
		});
	}
}

/** Names of the migrations applied now, in order; none when the database was up to date. */
export async function migrateToLatest(ownerUrl: string): Promise<string[]> {
	const pool = new pg.Pool({ connectionString: ownerUrl, max: 1, connectionTimeoutMillis: 15_000 });
	pool.on('error', () => {});
	const db = new Kysely<unknown>({ dialect: new PostgresDialect({ pool }) });
	try {
		const { error, results = [] } = await new Migrator({ db, provider }).migrateToLatest();
		const applied = results.filter((r) => r.status === 'Success').map((r) => r.migrationName);
		if (error !== undefined) {
			const failed = results.find((r) => r.status === 'Error');
			throw new MigrationFailed(failed?.migrationName ?? null, applied, error);
		}
		return applied;
	} finally {
		await db.destroy();
	}
}
