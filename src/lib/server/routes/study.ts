import type { RouteTable } from './table';

const study = '/(app)/studies/[study=id]';
const api = '/api/studies/[study=id]';

/** Setting a study up, and a subject’s way in and out. */
export const studyRoutes: RouteTable = {
	'/(app)/studies/new': { GET: 'study.create', POST: 'study.create' },
	[`${study}/schedule`]: { GET: 'study.read', POST: 'study.publish' },
	[`${study}/sites`]: { GET: 'study.read', POST: 'site.close' },
	[`${study}/allocation`]: { GET: 'study.read', POST: 'allocation.make' },
	[`${study}/screening`]: { GET: 'screening.read', POST: 'screening.edit' },
	[`${study}/screening/[screening=id]`]: { GET: 'screening.read', POST: 'subject.enrol' },
	[`${study}/signing`]: { GET: 'signature.sign', POST: 'signature.sign' },
	[`${study}/signatures/[signature=id]`]: { GET: 'signature.read' },
	[`${study}/subjects`]: { GET: 'subject.read' },
	[`${study}/subjects/[subject=id]`]: { GET: 'subject.read', POST: 'subject.exit' },

	[`${study}/subjects/[subject=id]/unmask`]: { GET: 'unmasking.record', POST: 'unmasking.record' },
	[`${study}/unmaskings`]: { GET: 'unmasking.read' },
	[`${study}/codes`]: { GET: 'code.print', POST: 'code.print' },
	[`${study}/codes/[print=id]/sheets.pdf`]: { GET: 'code.print' },
	[`${study}/kits`]: { GET: 'kit.read', POST: 'kit.act' },

	'/api/studies': { POST: 'study.create' },
	[`${api}/protocol`]: { GET: 'study.read', PATCH: 'study.edit' },
	[`${api}/protocol/publication`]: { POST: 'study.publish' },
	[`${api}/sites`]: { GET: 'study.read' },
	[`${api}/sites/[site=id]/approval`]: { PUT: 'site.approve' },
	[`${api}/sites/[site=id]/closures`]: { POST: 'site.close', DELETE: 'site.close' },
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
	[`${api}/subjects/[subject=id]/stratum`]: { PUT: 'subject.correct' },
	[`${api}/subjects/[subject=id]/unmasking`]: { POST: 'subject.unmask' },
	[`${api}/subjects/[subject=id]/unmasking-record`]: { POST: 'unmasking.record' },
	[`${api}/unmaskings`]: { GET: 'unmasking.read' },
	[`${api}/code-prints`]: { POST: 'code.print' },
	[`${api}/kits`]: { GET: 'kit.read', POST: 'kit.plan' },
	[`${api}/kits/levels`]: { PUT: 'kit.plan' },
	[`${api}/kits/deliveries`]: { POST: 'kit.plan' },
	[`${api}/kits/deliveries/[delivery=id]/receipt`]: { POST: 'kit.keep' },
	[`${api}/kits/losses`]: { POST: 'kit.keep' },
	[`${api}/subjects/[subject=id]/contact-details`]: { PUT: 'contact.edit' },
	[`${api}/subjects/[subject=id]/exits`]: { POST: 'subject.exit' }
};
