import type { RouteTable } from './table';

const study = '/(app)/studies/[study=id]';
const api = '/api/studies/[study=id]';

/** Setting a study up, and a subject’s way in and out. */
export const studyRoutes: RouteTable = {
	'/(app)/studies/new': { GET: 'study.create', POST: 'study.create' },
	'/(app)/studies/new/blank': { GET: 'study.create', POST: 'study.create' },
	'/(app)/studies/new/file': { GET: 'study.create', POST: 'study.create' },
	[`${study}/schedule`]: { GET: 'study.read' },
	[`${study}/schedule/versions`]: { GET: 'study.read' },
	[`${study}/schedule/definition.json`]: { GET: 'study.read' },
	[`${study}/setup`]: { GET: 'study.edit', POST: 'study.publish' },
	[`${study}/setup/study`]: { GET: 'study.edit' },
	[`${study}/setup/arms`]: { GET: 'study.edit' },
	[`${study}/setup/sites`]: { GET: 'study.edit' },
	[`${study}/setup/visits`]: { GET: 'study.edit' },
	[`${study}/setup/measures`]: { GET: 'study.edit' },
	[`${study}/setup/schedule`]: { GET: 'study.edit' },
	[`${study}/setup/eligibility`]: { GET: 'study.edit' },
	[`${study}/allocation`]: { GET: 'study.read', POST: 'allocation.make' },
	[`${study}/screening`]: { GET: 'screening.read', POST: 'screening.edit' },
	[`${study}/screening/[screening=id]`]: { GET: 'screening.read', POST: 'subject.enrol' },
	[`${study}/signing`]: { GET: 'signature.sign', POST: 'signature.sign' },
	[`${study}/signatures/[signature=id]`]: { GET: 'signature.read' },
	[`${study}/subjects`]: { GET: 'subject.read' },
	[`${study}/subjects/[subject=id]`]: { GET: 'subject.read', POST: 'subject.exit' },

	'/api/studies': { POST: 'study.create' },
	'/api/studies/blank': { POST: 'study.create' },
	'/api/studies/file': { POST: 'study.create' },
	[`${api}/protocol`]: { GET: 'study.read', PATCH: 'study.edit' },
	[`${api}/protocol/changes`]: { GET: 'study.edit' },
	[`${api}/protocol/publication`]: { POST: 'study.publish' },
	[`${api}/allocation-list`]: { GET: 'study.read', POST: 'allocation.make' },
	[`${api}/screenings`]: { GET: 'screening.read', POST: 'screening.edit' },
	[`${api}/screenings/[screening=id]`]: { GET: 'screening.read' },
	[`${api}/screenings/[screening=id]/eligibility`]: { PUT: 'screening.edit' },
	[`${api}/screenings/[screening=id]/closing`]: { POST: 'screening.edit' },
	[`${api}/screenings/[screening=id]/consents`]: { POST: 'consent.record' },
	[`${api}/screenings/[screening=id]/enrolment`]: { POST: 'subject.enrol' },
	[`${api}/signatures`]: { POST: 'signature.sign' },
	[`${api}/signatures/waiting`]: { GET: 'signature.sign' },
	[`${api}/signatures/[signature=id]`]: { GET: 'signature.read' },
	[`${api}/subjects`]: { GET: 'subject.read' },
	[`${api}/subjects/[subject=id]`]: { GET: 'subject.read' },
	[`${api}/subjects/[subject=id]/randomisation`]: { POST: 'subject.randomise' },
	[`${api}/subjects/[subject=id]/contact-details`]: { PUT: 'contact.edit' },
	[`${api}/subjects/[subject=id]/exits`]: { POST: 'subject.exit' }
};
