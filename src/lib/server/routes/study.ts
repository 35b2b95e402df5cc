import type { RouteTable } from './table';

const study = '/(app)/studies/[study=id]';
const api = '/api/studies/[study=id]';

/** Setting a study up, and a subject’s way in and out. */
export const studyRoutes: RouteTable = {
	'/(app)/studies/new': { GET: 'study.create', POST: 'study.create' },
	[`${study}/schedule`]: { GET: 'study.read', POST: 'study.publish' },
	[`${study}/allocation`]: { GET: 'study.read', POST: 'allocation.make' },
	[`${study}/screening`]: { GET: 'screening.read', POST: 'screening.edit' },
	[`${study}/screening/[screening=id]`]: { GET: 'screening.read', POST: 'subject.enrol' },
	[`${study}/signing`]: { GET: 'signature.sign', POST: 'signature.sign' },
	[`${study}/signatures/[signature=id]`]: { GET: 'signature.read' },
	[`${study}/consent`]: { GET: 'screening.read', POST: 'study.publish' },
	[`${study}/consents/[consent=id]/scan`]: { GET: 'consent.scan', POST: 'consent.scan' },
	[`${study}/flow`]: { GET: 'flow.read' },
	[`${study}/subjects`]: { GET: 'subject.read', POST: 'contact.read' },
	[`${study}/subjects/[subject=id]`]: { GET: 'subject.read', POST: 'subject.exit' },

	'/api/studies': { POST: 'study.create' },
	[`${api}/protocol`]: { GET: 'study.read', PATCH: 'study.edit' },
	[`${api}/protocol/publication`]: { POST: 'study.publish' },
	[`${api}/protocol/amendments`]: { POST: 'study.edit' },
	[`${api}/protocol/amendments/publication`]: { POST: 'study.publish' },
	[`${api}/protocol/followers`]: { POST: 'study.publish' },
	[`${api}/allocation-list`]: { GET: 'study.read', POST: 'allocation.make' },
	[`${api}/screenings`]: { GET: 'screening.read', POST: 'screening.edit' },
	[`${api}/screenings/[screening=id]`]: { GET: 'screening.read' },
	[`${api}/screenings/[screening=id]/eligibility`]: { PUT: 'screening.edit' },
	[`${api}/screenings/[screening=id]/closing`]: { POST: 'screening.edit' },
	[`${api}/screenings/[screening=id]/consents`]: { POST: 'consent.record' },
	[`${api}/screenings/[screening=id]/consents/withdrawal`]: { POST: 'consent.record' },
	[`${api}/screenings/[screening=id]/enrolment`]: { POST: 'subject.enrol' },
	[`${api}/signatures`]: { POST: 'signature.sign' },
	[`${api}/signatures/waiting`]: { GET: 'signature.sign' },
	[`${api}/signatures/[signature=id]`]: { GET: 'signature.read' },
	[`${api}/subjects`]: { GET: 'subject.read' },
	[`${api}/subjects/[subject=id]`]: { GET: 'subject.read' },
	[`${api}/subjects/[subject=id]/randomisation`]: { POST: 'subject.randomise' },
	[`${api}/subjects/[subject=id]/contact-details`]: { PUT: 'contact.edit' },
	[`${api}/subjects/[subject=id]/consents`]: { POST: 'consent.record' },
	[`${api}/subjects/[subject=id]/reconsent-refusals`]: { POST: 'consent.record' },
	[`${api}/subjects/[subject=id]/exits`]: { POST: 'subject.exit' },
	[`${api}/subjects/[subject=id]/exits/taking-back`]: { POST: 'subject.exit' },
	[`${api}/subjects/[subject=id]/transfers`]: { POST: 'subject.transfer' },
	[`${api}/reconsents`]: { GET: 'screening.read' },
	[`${api}/consents/[consent=id]/scans`]: { POST: 'consent.scan' },
	[`${api}/scans/[scan=id]`]: { GET: 'consent.scan' },
	[`${api}/contact-search`]: { POST: 'contact.read' },
	[`${api}/flow`]: { GET: 'flow.read' }
};
