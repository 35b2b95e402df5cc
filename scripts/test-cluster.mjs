// `up` starts the tests' cluster and prints where it is; `down` removes it. For running one test file by hand.
import { run } from './lib/say.mjs';
import { removeTestCluster, testCluster } from './lib/test-cluster.mjs';

await run(async () => {
	const [what = 'up', ...rest] = process.argv.slice(2);
	if (what === 'down') return removeTestCluster();
	const cluster = await testCluster({
		withDemo: rest.includes('--demo'),
		say: (line) => process.stderr.write(`${line}\n`)
	});
	process.stdout.write(JSON.stringify(cluster) + '\n');
});
