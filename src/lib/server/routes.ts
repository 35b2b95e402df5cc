import type { Grant } from '$lib/domain/person/roles';
import { may } from './permission';
import { analysisRoutes } from './routes/analysis';
import { generalRoutes } from './routes/general';
import { peopleRoutes } from './routes/people';
import { studyRoutes } from './routes/study';
import type { Access, Method, RouteTable } from './routes/table';
import { visitRoutes } from './routes/visits';

/**
 * What each route asks of who comes. A route or method that is not here answers nobody: the guard in hooks.server.ts
 * reads this table, and a test compares it with the build's manifest. Loads, actions and commands then ask the door
 * again, with the site.
 */
export const routeAccess: RouteTable = {
	...generalRoutes,
	...peopleRoutes,
	...studyRoutes,
	...visitRoutes,
	...analysisRoutes
};

/** May somebody with these grants come in at all? The site is the door's question. */
export function mayEnter(
	grants: readonly Grant[],
	access: Access,
	studyId: string | null
): boolean {
	if (access === 'public' || access === 'signed-in') return true;
	return may(grants, access, { studyId });
}

/** The access a request needs; undefined: no such route or method, so no. */
export function accessOf(routeId: string, method: string): Access | undefined {
	const asked = method === 'HEAD' || method === 'OPTIONS' ? 'GET' : method;
	return routeAccess[routeId]?.[asked as Method];
}
