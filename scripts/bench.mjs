// `npm run bench`: measures and prints; nothing is judged. Each tests/bench/*.bench.mjs runs by itself and prints
// its own figures; HEDDLE_TEST_CLUSTER in its environment says where the database is.
import { join } from 'node:path';
import { cpus, totalmem } from 'node:os';
import { build, installDependencies } from './lib/build.mjs';
import { execute } from './lib/commands.mjs';
import { root } from './lib/places.mjs';
import { print, run, say } from './lib/say.mjs';
import { testFiles } from './lib/test-run.mjs';
import { removeTestCluster, testBuild, testCluster } from './lib/test-cluster.mjs';

await run(async () => {
	const wanted = process.argv.slice(2);
	const files = testFiles('tests/bench', /\.bench\.mjs$/).filter(
		(file) => wanted.length === 0 || wanted.some((word) => file.includes(word))
	);
	if (files.length === 0) return print('There is nothing to measure.');
	await installDependencies(say);
	await build({ ...testBuild, say });
	const cluster = await testCluster({ name: 'bench', throwAway: false, say });
	print(
		`\nNode ${process.versions.node}, ${cpus().length} processors (${cpus()[0]?.model}), ${Math.round(totalmem() / 2 ** 30)} GB\n`
	);
	let failed = 0;
	try {
		for (const file of files) {
			print(`## ${file}`);
			const { status } = await execute(process.execPath, [join(root, file)], {
				cwd: root,
				env: {
					...process.env,
					HEDDLE_TEST_CLUSTER: JSON.stringify(cluster),
					HEDDLE_BUILD_DIR: testBuild.buildDir
				},
				onLine: print
			});
			if (status !== 0) failed++;
			print();
		}
	} finally {
		await removeTestCluster('bench');
	}
	return failed > 0 ? 1 : 0;
});
