import { z } from 'zod';

export const boardOutput = z.object({
	member: z.boolean(),
	packs: z.array(
		z.object({
			reportId: z.uuid(),
			look: z.number(),
			kind: z.enum(['open', 'closed']),
			pages: z.number().nullable(),
			cut: z
				.object({ label: z.string(), cutOffAt: z.iso.datetime(), fingerprint: z.string() })
				.nullable(),
			ready: z.boolean(),
			downloads: z.number(),
			people: z.array(z.object({ name: z.string(), status: z.string(), downloads: z.number() }))
		})
	),
	recommendations: z.array(
		z.object({
			id: z.uuid(),
			reportId: z.uuid(),
			look: z.number(),
			advice: z.string(),
			reason: z.string(),
			meetingOn: z.string(),
			attendees: z.string(),
			recordedBy: z.string(),
			recordedAt: z.iso.datetime()
		})
	)
});
