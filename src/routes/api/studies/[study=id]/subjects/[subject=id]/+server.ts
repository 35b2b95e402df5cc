import { z } from 'zod';
import { getSubjectRecord } from '$lib/domain/subject/record.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'One subject’s record in the order of time. Contact details are not in it.',
	response: z.object({
		id: z.uuid(),
		number: z.string(),
		version: z.number(),
		kitNumber: z.string().nullable(),
		/** Where the study masks nothing. */
		arm: z.string().nullable(),
		items: z.array(
			z.object({
				id: z.string(),
				kind: z.string(),
				when: z.string(),
				title: z.string(),
				lines: z.array(z.string()),
				measurements: z
					.array(
						z.object({
							id: z.uuid(),
							name: z.string(),
							value: z.string(),
							remarks: z.array(z.string())
						})
					)
					.optional()
			})
		)
	}),
	handle: async ({ actor, params }) => {
		const { subject, items } = await getSubjectRecord(
			actor,
			params.study as string,
			params.subject as string
		);
		return {
			id: subject.id,
			number: subject.number,
			version: subject.version,
			kitNumber: subject.kitNumber,
			arm: subject.arm,
			items: items.map(({ id, kind, when, title, lines, measurements }) => ({
				id,
				kind,
				when,
				title,
				lines,
				measurements
			}))
		};
	}
});
