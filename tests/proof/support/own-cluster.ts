import { build } from '../../../scripts/lib/build.mjs';
import {
	openCluster,
	runningServer,
	startCluster,
	type Cluster
} from '../../../scripts/lib/cluster.mjs';
import { secrets } from '../../../scripts/lib/secrets.mjs';
import {
	removeTestCluster,
	testBuild,
	testCluster,
	testState
} from '../../../scripts/lib/test-cluster.mjs';
import { childrenOf, killAtOnce } from './processes';

export interface OwnCluster {
	/** Kills PostgreSQL and everything it runs, at once and without a word. */
	kill(): Promise<void>;
	start(): Promise<void>;
	remove(): Promise<void>;
}

/**
 * A PostgreSQL cluster for one test file alone, with PostgreSQL's default durability: what kills it must not take other
 * test files along. Databases that are made from here on lie in it.
 */
export async function ownCluster(name: string): Promise<OwnCluster> {
	await build({ ...testBuild, say: () => {} });
	await removeTestCluster(name);
	const made = await testCluster({ name, throwAway: false });
	process.env.HEDDLE_TEST_CLUSTER = JSON.stringify(made);
	const cluster: Cluster = await openCluster({
		state: testState(name),
		port: made.port,
		passwords: secrets(testState(name)),
		say: () => {}
	});
	return {
		async kill() {
			const server = runningServer(cluster);
			if (!server) throw new Error('PostgreSQL is not running');
			await killAtOnce([server.pid, ...childrenOf(server.pid)]);
		},
		start: () => startCluster(cluster),
		remove: () => removeTestCluster(name)
	};
}
