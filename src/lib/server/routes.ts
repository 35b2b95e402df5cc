import type { Grant } from '$lib/domain/person/roles';
import { may, type Capability } from './permission';

/**
 * What each route asks of who comes. A route or method that is not here answers nobody: the guard in hooks.server.ts
 * reads this table, and a test compares it with the build's manifest. Loads, actions and commands then ask the door
 * again, with the site.
 */
export type Access = 'public' | 'signed-in' | Capability;
export type Method = 'GET' | 'POST' | 'PUT' | 'PATCH' | 'DELETE';

export const routeAccess: Record<string, Partial<Record<Method, Access>>> = {
	'/healthz': { GET: 'public' },
	'/readyz': { GET: 'public' },
	'/(public)/sign-in': { GET: 'public', POST: 'public' },
	'/(public)/invitation/[token]': { GET: 'public', POST: 'public' },
	'/(public)/forgotten': { GET: 'public', POST: 'public' },
	'/(public)/reset/[token]': { GET: 'public', POST: 'public' },
	'/(public)/set-up/[token]': { GET: 'public', POST: 'public' },
	'/calendar/[token].ics': { GET: 'public' },

	'/(app)': { GET: 'signed-in' },
	'/(app)/locked': { GET: 'signed-in', POST: 'signed-in' },
	'/(app)/account': { GET: 'signed-in', POST: 'signed-in' },
	'/(app)/people': { GET: 'person.manage', POST: 'person.manage' },
	'/(app)/people/[person=id]': { GET: 'person.manage', POST: 'role.grant' },
	'/(app)/jobs': { GET: 'job.read', POST: 'job.read' },
	'/(app)/studies/new': { GET: 'study.create', POST: 'study.create' },

	'/(app)/studies/[study=id]': { GET: 'study.enter' },
	'/(app)/studies/[study=id]/schedule': { GET: 'study.read', POST: 'study.publish' },
	'/(app)/studies/[study=id]/import': { GET: 'import.run', POST: 'import.run' },
	'/(app)/studies/[study=id]/import/[batch=id]': { GET: 'import.run', POST: 'import.run' },
	'/(app)/studies/[study=id]/screening': { GET: 'screening.edit', POST: 'screening.edit' },
	'/(app)/studies/[study=id]/screening/[screening=id]': {
		GET: 'screening.edit',
		POST: 'subject.enrol'
	},
	'/(app)/studies/[study=id]/subjects': { GET: 'subject.read' },
	'/(app)/studies/[study=id]/subjects/[subject=id]': { GET: 'subject.read', POST: 'subject.exit' },
	'/(app)/studies/[study=id]/windows': { GET: 'subject.read' },
	'/(app)/studies/[study=id]/visits/[visit=id]': { GET: 'subject.read', POST: 'visit.measure' },
	'/(app)/studies/[study=id]/visits/[visit=id]/book': { GET: 'visit.book', POST: 'visit.book' },
	'/(app)/studies/[study=id]/visits/[visit=id]/chase': { GET: 'visit.chase', POST: 'visit.chase' },
	'/(app)/studies/[study=id]/chase': { GET: 'subject.read' },
	'/(app)/studies/[study=id]/cuts': { GET: 'cut.read', POST: 'cut.make' },
	'/(app)/studies/[study=id]/looks': { GET: 'look.read', POST: 'look.pooled' },
	'/(app)/studies/[study=id]/looks/[look=id]': { GET: 'look.read', POST: 'report.make' },
	'/(app)/studies/[study=id]/board': { GET: 'board.read', POST: 'board.read' },
	'/(app)/studies/[study=id]/board/[report=id]/report.pdf': { GET: 'board.read' },
	'/(app)/studies/[study=id]/audit': { GET: 'audit.read' },
	'/(app)/studies/[study=id]/audit/export.csv': { GET: 'audit.export' },

	'/api/openapi.json': { GET: 'signed-in' },
	'/api/session': { GET: 'signed-in', DELETE: 'signed-in' },
	'/api/session/lock': { POST: 'signed-in' },
	'/api/session/unlock': { POST: 'signed-in' }
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
