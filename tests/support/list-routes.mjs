// Prints every route of the build with its methods and form actions, as the framework's own manifest has them.
import { resolve } from 'node:path';
import { pathToFileURL } from 'node:url';

const server = resolve(process.argv[2] ?? '', 'output/server');
const load = (/** @type {string} */ file) => import(pathToFileURL(resolve(server, file)).href);
const { manifest } = await load('manifest-full.js');
const methods = ['GET', 'POST', 'PUT', 'PATCH', 'DELETE', 'OPTIONS', 'HEAD'];
const routes = [];
for (const route of manifest._.routes) {
	/** @type {string[]} */
	const answers = [];
	/** @type {string[]} */
	let actions = [];
	if (route.endpoint) {
		const module = await route.endpoint();
		answers.push(...methods.filter((method) => module[method]));
		if (module.fallback) answers.push('fallback');
	}
	if (route.page) {
		answers.push('GET');
		const node = await manifest._.nodes[route.page.leaf]();
		actions = Object.keys(node.server?.actions ?? {});
		if (actions.length > 0) answers.push('POST');
	}
	routes.push({
		id: route.id,
		params: route.params.map((/** @type {{ name: string }} */ p) => p.name),
		page: Boolean(route.page),
		methods: [...new Set(answers)],
		actions
	});
}
process.stdout.write(JSON.stringify(routes));
process.exit(0);
