import { z } from 'zod';
import { visitStatuses } from '$lib/domain/visit/status';
import { exitKinds } from '$lib/domain/subject/exit';
import { threadsQuery } from '$lib/domain/subject/subject.input';
import { findThreads } from '$lib/domain/subject/threads.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

const day = z.number().nullable();

export const GET = endpoint({
	summary: 'Subjects with their visits, as days since each subject’s anchor.',
	query: threadsQuery,
	response: z.object({
		items: z.array(
			z.object({
				id: z.uuid(),
				number: z.string(),
				importedAs: z.string().nullable(),
				site: z.object({ id: z.uuid(), code: z.string(), name: z.string() }),
				enrolledOn: z.iso.date(),
				randomisedOn: z.iso.date().nullable(),
				today: day,
				exit: z.object({ kind: z.enum(exitKinds), at: day, on: z.iso.date() }).nullable(),
				visits: z.array(
					z.object({
						id: z.uuid(),
						name: z.string(),
						position: z.number(),
						status: z.enum(visitStatuses),
						earliest: day,
						target: day,
						latest: day,
						took: day,
						booked: day,
						earliestOn: z.iso.date().nullable(),
						latestOn: z.iso.date().nullable()
					})
				)
			})
		),
		nextCursor: z.string().nullable()
	}),
	handle: ({ actor, params, query }) => findThreads(actor, params.study as string, query)
});
