import type { RouteTable } from './table';

/** Windows, bookings, measurements, the chase, calendars. */
export const visitRoutes: RouteTable = {
	'/calendar/[token].ics': { GET: 'public' },
	'/(app)/studies/[study=id]/windows': { GET: 'subject.read', POST: 'feed.own' },
	'/(app)/studies/[study=id]/visits/[visit=id]': { GET: 'subject.read', POST: 'visit.measure' },
	'/(app)/studies/[study=id]/visits/[visit=id]/book': { GET: 'visit.book', POST: 'visit.book' },
	'/(app)/studies/[study=id]/visits/[visit=id]/chase': { GET: 'visit.chase', POST: 'visit.chase' },
	'/(app)/studies/[study=id]/chase': { GET: 'subject.read' },
	'/api/studies/[study=id]/windows': { GET: 'subject.read' },
	'/api/studies/[study=id]/feed': { GET: 'feed.own', POST: 'feed.own', DELETE: 'feed.own' },
	'/api/studies/[study=id]/visits/[visit=id]': { GET: 'subject.read' },
	'/api/studies/[study=id]/visits/[visit=id]/free-times': { GET: 'visit.book' },
	'/api/studies/[study=id]/visits/[visit=id]/appointment': {
		POST: 'visit.book',
		PUT: 'visit.book'
	},
	'/api/studies/[study=id]/visits/[visit=id]/appointment/cancel': { POST: 'visit.book' },
	'/api/studies/[study=id]/visits/[visit=id]/start': { POST: 'visit.measure' },
	'/api/studies/[study=id]/visits/[visit=id]/finish': { POST: 'visit.measure' },
	'/api/studies/[study=id]/visits/[visit=id]/missed': { POST: 'visit.chase' },
	'/api/studies/[study=id]/visits/[visit=id]/contacts': {
		GET: 'subject.read',
		POST: 'visit.chase'
	},
	'/api/studies/[study=id]/visits/[visit=id]/measurements/[measure=id]': {
		PUT: 'visit.record'
	},
	'/api/studies/[study=id]/visits/[visit=id]/measurements/[measure=id]/history': {
		GET: 'subject.read'
	}
};
