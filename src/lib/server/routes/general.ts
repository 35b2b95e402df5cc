import type { RouteTable } from './table';

/** Signing in and out, health, the API’s own description. */
export const generalRoutes: RouteTable = {
	'/healthz': { GET: 'public' },
	'/readyz': { GET: 'public' },
	'/(public)/sign-in': { GET: 'public', POST: 'public' },
	'/(app)': { GET: 'signed-in' },
	'/(app)/locked': { GET: 'signed-in', POST: 'signed-in' },
	'/(app)/studies/[study=id]': { GET: 'study.enter' },
	'/api/openapi.json': { GET: 'signed-in' },
	'/api/session': { GET: 'signed-in', DELETE: 'signed-in' },
	'/api/session/lock': { POST: 'signed-in' },
	'/api/session/unlock': { POST: 'signed-in' }
};
