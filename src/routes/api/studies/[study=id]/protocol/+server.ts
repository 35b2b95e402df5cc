import { z } from 'zod';
import { checkDefinition } from '$lib/domain/study/check';
import { editDraft } from '$lib/domain/study/draft.commands.server';
import { editDraftInput } from '$lib/domain/study/edits.input';
import { getProtocol } from '$lib/domain/study/study.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary:
		'The newest protocol version: its definition, and what the check before publishing finds.',
	response: z.object({
		id: z.uuid(),
		number: z.number(),
		status: z.enum(['draft', 'published']),
		publishedAt: z.iso.datetime().nullable(),
		version: z.number(),
		definition: z.record(z.string(), z.unknown()),
		findings: z.array(
			z.object({ weight: z.enum(['stops', 'warns']), path: z.string(), message: z.string() })
		)
	}),
	handle: async ({ actor, params }) => {
		const { id, number, status, publishedAt, version, definition } = await getProtocol(
			actor,
			params.study as string
		);
		return {
			id,
			number,
			status,
			publishedAt: publishedAt?.toISOString() ?? null,
			version,
			definition,
			findings: checkDefinition(definition).map(({ weight, path, problem }) => ({
				weight,
				path,
				message: problem.message
			}))
		};
	}
});

export const PATCH = endpoint({
	summary: 'Changes the draft: all of the edits or none. Answers with the edits that undo them.',
	body: editDraftInput,
	response: z.object({
		version: z.number(),
		inverse: z.array(z.record(z.string(), z.unknown())),
		findings: z.array(
			z.object({
				weight: z.enum(['stops', 'warns']),
				path: z.string(),
				say: z.string(),
				section: z.string(),
				place: z.string()
			})
		)
	}),
	needsVersion: true,
	limit: 2 * 1024 * 1024,
	handle: ({ actor, params, body, version }) =>
		editDraft(actor, params.study as string, body, version)
});
