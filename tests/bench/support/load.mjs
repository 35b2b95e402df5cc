// Loads the program's own modules, and those of the tests, into a plain Node program.
import { createServer } from 'vite';
import { root } from '../../../scripts/lib/places.mjs';

/**
 * Runs the work with a function that loads a module by its path from the top of the repository.
 * @param {(load: (path: string) => Promise<any>) => Promise<void>} work
 */
export async function withModules(work) {
	const vite = await createServer({
		root,
		mode: 'cli',
		appType: 'custom',
		logLevel: 'error',
		server: { middlewareMode: true, hmr: false, ws: false, watch: null },
		optimizeDeps: { noDiscovery: true }
	});
	try {
		await work((path) => vite.ssrLoadModule(`/${path}`));
	} finally {
		await vite.close();
	}
}
