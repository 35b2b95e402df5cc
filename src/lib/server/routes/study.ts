import type { RouteTable } from './table';

/** Setting a study up, and a subject’s way in and out. */
export const studyRoutes: RouteTable = {
	'/(app)/studies/new': { GET: 'study.create', POST: 'study.create' },
	'/(app)/studies/[study=id]/schedule': { GET: 'study.read', POST: 'study.publish' },
	'/(app)/studies/[study=id]/screening': { GET: 'screening.edit', POST: 'screening.edit' },
	'/(app)/studies/[study=id]/screening/[screening=id]': {
		GET: 'screening.edit',
		POST: 'subject.enrol'
	},
	'/(app)/studies/[study=id]/subjects': { GET: 'subject.read' },
	'/(app)/studies/[study=id]/subjects/[subject=id]': { GET: 'subject.read', POST: 'subject.exit' }
};
