import type { RequestHandler } from '@sveltejs/kit';
import { z } from 'zod';
import { keepScan, maySendScan } from '$lib/domain/upload/upload.commands.server';
import { scanOutput } from '$lib/domain/upload/upload.input';
import { Refusal } from '$lib/refusal';
import { endpoint } from '$lib/server/api/endpoint';
import { fault, problem } from '$lib/server/api/problem';
import { letGo, readScan } from '$lib/server/uploads/read-scan';
import { fileNameIn } from '$lib/server/imports/upload';

/** Said in the API's description; the file itself is the body, as it is. */
const described = endpoint({
	summary:
		'Keeps the scan of a signed consent: the body is the file (PDF, PNG or JPEG, at most 20 MB), its name stands in Content-Disposition, and a replaced scan’s reason in the header x-heddle-reason (percent-encoded).',
	body: z.unknown(),
	response: scanOutput,
	status: 201,
	handle: () => Promise.reject(new Refusal('WRONG_TYPE', { wanted: 'the file itself' }))
});

function reasonIn(headers: Headers): string {
	try {
		return decodeURIComponent(headers.get('x-heddle-reason') ?? '');
	} catch {
		throw new Refusal('INVALID', {}, { reason: 'The reason cannot be read.' });
	}
}

const receive: RequestHandler = async ({ request, params, locals }) => {
	try {
		if (!locals.actor) throw new Refusal('NOT_SIGNED_IN');
		const [studyId, consentId] = [params.study as string, params.consent as string];
		await maySendScan(locals.actor, studyId, consentId);
		const named = request.headers.has('content-disposition');
		const made = await keepScan(locals.actor, studyId, consentId, {
			reason: reasonIn(request.headers),
			name: named ? fileNameIn(request.headers) : null,
			type: request.headers.get('content-type'),
			bytes: await readScan(request)
		});
		return Response.json(made, {
			status: 201,
			headers: { 'cache-control': 'no-store', etag: `"${made.version}"` }
		});
	} catch (thrown) {
		await letGo(request);
		if (thrown instanceof Refusal) return problem(thrown, locals.requestId);
		return fault(thrown, locals.requestId);
	}
};

export const POST = Object.assign(receive, { spec: described.spec });
