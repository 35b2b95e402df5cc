import { z } from 'zod';

/** What the list of windows may be asked for; the same words stand in the page's address. */
export const windowKinds = ['due', 'closing', 'open', 'passed', 'ahead'] as const;
export type WindowKind = (typeof windowKinds)[number];

export const windowKindNames: Record<WindowKind, string> = {
	due: 'open and passed',
	closing: 'closing within 3 days',
	open: 'open',
	passed: 'passed',
	ahead: 'opening within 4 weeks'
};

export const windowsQuery = z.object({
	site: z.union([z.literal(''), z.uuid('Choose a site of the list.')]).default(''),
	what: z.enum(windowKinds, 'Choose one of the list.').default('due'),
	text: z.string().trim().max(80, 'Use at most 80 characters.').default(''),
	cursor: z.string().max(200).default(''),
	limit: z.coerce.number().int().min(1).max(100).default(25)
});
export type WindowsQuery = z.output<typeof windowsQuery>;

export const windowRow = z
	.object({
		visitId: z.string(),
		version: z.number(),
		subjectId: z.string(),
		number: z.string(),
		visit: z.string(),
		siteId: z.string(),
		site: z.string(),
		zone: z.string(),
		status: z.enum(['planned', 'booked']),
		earliest: z.string(),
		target: z.string(),
		latest: z.string(),
		today: z.string(),
		left: z.object({
			state: z.enum(['to-come', 'open', 'closing', 'passed']),
			days: z.number(),
			text: z.string()
		}),
		/** The day booked, where the visit takes place. */
		bookedOn: z.string().nullable(),
		/** What was done last, in words. */
		lastStep: z.string()
	})
	.meta({ id: 'WindowRow' });
export type WindowRow = z.output<typeof windowRow>;

export const windowsPage = z.object({
	items: z.array(windowRow),
	nextCursor: z.string().nullable()
});
export type WindowsPage = z.output<typeof windowsPage>;

/** The query of an address; what is not asked for is left out. */
export const windowsSearch = (
	query: Pick<WindowsQuery, 'site' | 'what' | 'text'>,
	cursor: string
): string =>
	new URLSearchParams(
		Object.entries({ ...query, cursor }).filter(([, value]) => value !== '')
	).toString();
