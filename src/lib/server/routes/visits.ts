import type { RouteTable } from './table';

/** Windows, bookings, measurements, the chase, calendars. */
export const visitRoutes: RouteTable = {
	'/calendar/[token].ics': { GET: 'public' },
	'/(app)/studies/[study=id]/windows': { GET: 'subject.read' },
	'/(app)/studies/[study=id]/visits/[visit=id]': { GET: 'subject.read', POST: 'visit.measure' },
	'/(app)/studies/[study=id]/visits/[visit=id]/book': { GET: 'visit.book', POST: 'visit.book' },
	'/(app)/studies/[study=id]/visits/[visit=id]/chase': { GET: 'visit.chase', POST: 'visit.chase' },
	'/(app)/studies/[study=id]/chase': { GET: 'subject.read' }
};
