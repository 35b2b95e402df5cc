import type { RouteTable } from './table';

/** Accounts, roles, jobs, the audit trail. */
export const peopleRoutes: RouteTable = {
	'/(public)/invitation/[token]': { GET: 'public', POST: 'public' },
	'/(public)/forgotten': { GET: 'public', POST: 'public' },
	'/(public)/reset/[token]': { GET: 'public', POST: 'public' },
	'/(public)/set-up/[token]': { GET: 'public', POST: 'public' },
	'/(app)/account': { GET: 'signed-in', POST: 'signed-in' },
	'/(app)/people': { GET: 'person.manage', POST: 'person.manage' },
	'/(app)/people/[person=id]': { GET: 'person.manage', POST: 'role.grant' },
	'/(app)/people/access.csv': { GET: 'person.manage' },
	'/api/people': { GET: 'person.manage' },
	'/(app)/jobs': { GET: 'job.read', POST: 'job.read' },
	'/api/jobs': { GET: 'job.read' },
	'/api/jobs/[job=id]': { GET: 'signed-in' },
	'/api/jobs/[job=id]/cancel': { POST: 'signed-in' },
	'/api/studies/[study=id]/audit': { GET: 'audit.read' },
	'/api/studies/[study=id]/history': { GET: 'subject.read' },
	'/(app)/studies/[study=id]/history': { GET: 'subject.read' },
	'/(app)/studies/[study=id]/audit': { GET: 'audit.read' },
	'/(app)/studies/[study=id]/audit/export.csv': { GET: 'audit.export' }
};
