import { execFileSync } from 'node:child_process';
import { randomBytes } from 'node:crypto';
import { cpSync, existsSync, mkdirSync, rmSync } from 'node:fs';
import { join } from 'node:path';
import { createDatabase, dropDatabase, sql, urls } from '../../scripts/lib/databases.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { demoFiles, testEnvironment, type TestCluster } from '../../scripts/lib/test-cluster.mjs';

let known: TestCluster | undefined;

/** The running cluster: the one the test script made, or one made now when a test file is run by itself. */
export function cluster(demo = false): TestCluster {
	if (known && (known.demo || !demo)) return known;
	const given = process.env.HEDDLE_TEST_CLUSTER;
	known = JSON.parse(
		given ??
			execFileSync(
				process.execPath,
				[join(root, 'scripts/test-cluster.mjs'), 'up', ...(demo ? ['--demo'] : [])],
				{ encoding: 'utf8', stdio: ['ignore', 'pipe', 'inherit'] }
			)
	) as TestCluster;
	return known;
}

export interface FreshDatabase {
	name: string;
	/** As the web server and the worker: role heddle_app. */
	appUrl: string;
	/** As the migrations: role heddle_owner. */
	ownerUrl: string;
	/** As the look worker: role heddle_unmasked. */
	unmaskedUrl: string;
	/** As the superuser: for what no part of Heddle may do. */
	superUrl: string;
	/** A folder of its own for stored files (`open` and `closed` in it). */
	files: string;
	/** The environment of a Heddle process on this database (ORIGIN and PORT are the caller's). */
	env: Record<string, string>;
	/** Statements one after the other as the superuser; the rows of each. */
	sql(...statements: string[]): Promise<any[][]>; // eslint-disable-line @typescript-eslint/no-explicit-any
	drop(): Promise<void>;
}

/**
 * A database of its own, cloned from the migrated template (or the one that holds the demo).
 * Drop it in afterAll; what is left over goes with the cluster.
 */
export async function freshDatabase({
	template = 'migrated'
}: { template?: 'migrated' | 'demo' } = {}): Promise<FreshDatabase> {
	const where = cluster(template === 'demo');
	if (template === 'demo' && !where.demo) throw new Error('There is no demo template.');
	const name = `t_${randomBytes(6).toString('hex')}`;
	const { superUrl: adminUrl } = urls(where, where.passwords, 'postgres');
	await createDatabase(adminUrl, name, {
		template: template === 'demo' ? 'heddle_demo' : 'heddle_template'
	});
	const files = join(where.state, 'files', name);
	mkdirSync(files, { recursive: true });
	if (template === 'demo' && existsSync(demoFiles(where)))
		cpSync(demoFiles(where), files, { recursive: true });
	mkdirSync(join(files, 'open'), { recursive: true });
	mkdirSync(join(files, 'closed'), { recursive: true });
	const own = urls(where, where.passwords, name);
	return {
		name,
		...own,
		files,
		env: testEnvironment(where, name, files),
		sql: (...statements) => sql(own.superUrl, ...statements),
		drop: async () => {
			await dropDatabase(adminUrl, name);
			rmSync(files, { recursive: true, force: true });
		}
	};
}

/** Gives this process the environment of a database, for code that reads the configuration. */
export function useEnvironment(database: FreshDatabase, extra: Record<string, string> = {}): void {
	Object.assign(process.env, database.env, { ORIGIN: 'http://127.0.0.1:1' }, extra);
}

/** The accounts of the demo template, as the demo program printed them. */
export const demoAccounts = () =>
	(cluster(true).accounts ?? []) as {
		role: string;
		email: string;
		password: string;
		note: string;
	}[];
