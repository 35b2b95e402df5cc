// `npm run reset`: removes the local installation with all its data, after asking.
import { existsSync, rmSync } from 'node:fs';
import { createInterface } from 'node:readline/promises';
import { clusterExists, clusterHome, openCluster, stopCluster } from './lib/cluster.mjs';
import { state } from './lib/local.mjs';
import { holderOf } from './lib/lock.mjs';
import { startLock } from './lib/local.mjs';
import { Trouble, print, run, say } from './lib/say.mjs';

await run(async () => {
	if (!existsSync(state)) return print('There is nothing to remove.');
	const holder = holderOf(startLock);
	if (holder)
		throw new Trouble(`Heddle runs here now (process ${holder.pid}). Stop it with Ctrl-C first.`);
	if (!process.argv.includes('--yes')) {
		print(`This removes every study, file, mail and key in ${state}. It cannot be undone.`);
		if (!process.stdin.isTTY)
			throw new Trouble(
				'Nothing was removed: there is nobody to ask. `npm run reset -- --yes` does it without asking.'
			);
		const line = createInterface({ input: process.stdin, output: process.stdout });
		const answer = await line.question('Type the word reset to go on: ');
		line.close();
		if (answer.trim() !== 'reset') {
			print('Nothing was removed.');
			return 1;
		}
	}
	if (clusterExists(state))
		await stopCluster(await openCluster({ state, port: 0, passwords: {}, say }), 'immediate');
	rmSync(clusterHome(state), { recursive: true, force: true });
	rmSync(state, { recursive: true, force: true });
	print('Removed. `npm start` begins anew.');
});
