import type { RequestHandler } from '@sveltejs/kit';
import { z } from 'zod';
import { uploadImport } from '$lib/domain/import/import.commands.server';
import { uploadBody } from '$lib/domain/import/import.input';
import { importHeadOutput } from '$lib/domain/import/import.output';
import { findImports } from '$lib/domain/import/import.reads.server';
import { importLimits } from '$lib/domain/import/table';
import { Refusal } from '$lib/refusal';
import { endpoint } from '$lib/server/api/endpoint';
import { listed, pageQuery } from '$lib/server/api/page';
import { fault, problem } from '$lib/server/api/problem';
import { fileNameIn, readBytes } from '$lib/server/imports/upload';

export const GET = endpoint({
	summary: 'Files that were handed in, the newest first.',
	query: pageQuery,
	response: z.object({ items: z.array(importHeadOutput), nextCursor: z.string().nullable() }),
	handle: async ({ actor, params, query }) =>
		listed(await findImports(actor, params.study as string), query)
});

const json = endpoint({
	summary:
		'Takes in a file in long format: as JSON, or as it is with the type text/csv (its name in Content-Disposition).',
	body: uploadBody,
	// A text in JSON takes more room than the file: quotes, line ends and the like are written longer.
	limit: 2 * importLimits.bytes,
	response: z.object({
		id: z.uuid(),
		version: z.number(),
		columns: z.array(z.string()),
		bytes: z.number(),
		sha256: z.string()
	}),
	status: 201,
	handle: ({ actor, params, body }) =>
		uploadImport(actor, params.study as string, {
			name: body.fileName,
			bytes: Buffer.from(body.content, 'utf8')
		})
});

const plain: RequestHandler = async ({ request, params, locals }) => {
	try {
		if (!locals.actor) throw new Refusal('NOT_SIGNED_IN');
		const made = await uploadImport(locals.actor, params.study as string, {
			name: fileNameIn(request.headers),
			bytes: await readBytes(request)
		});
		return Response.json(made, {
			status: 201,
			headers: { 'cache-control': 'no-store', etag: `"${made.version}"` }
		});
	} catch (thrown) {
		if (thrown instanceof Refusal) return problem(thrown, locals.requestId);
		return fault(thrown, locals.requestId);
	}
};

const either: RequestHandler = (event) =>
	/^text\/csv\b/i.test(event.request.headers.get('content-type') ?? '')
		? plain(event)
		: json(event);
export const POST = Object.assign(either, { spec: json.spec });
