import { execFileSync } from 'node:child_process';
import { join } from 'node:path';
import { root } from '../../scripts/lib/places.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';

export interface BuiltRoute {
	/** As the framework names it: '/(app)/studies/[study=id]'. */
	id: string;
	params: string[];
	page: boolean;
	methods: string[];
	/** The names of its form actions. */
	actions: string[];
}

let known: BuiltRoute[] | undefined;

/** Every route of the test build, from the framework's manifest; the server must have been built. */
export const builtRoutes = (): BuiltRoute[] =>
	(known ??= JSON.parse(
		execFileSync(
			process.execPath,
			[join(root, 'tests/support/list-routes.mjs'), join(root, testBuild.kitDir)],
			{ encoding: 'utf8', env: { PATH: process.env.PATH ?? '', LOG_LEVEL: 'silent' } }
		)
	) as BuiltRoute[]);

/** The route's address with its parameters filled in. */
export const addressOf = (route: BuiltRoute, idOf: (param: string) => string): string =>
	route.id
		.replace(/\/\([^)]+\)/g, '')
		.replace(/\[(\w+)(?:=\w+)?\]/g, (_, param: string) => idOf(param)) || '/';
