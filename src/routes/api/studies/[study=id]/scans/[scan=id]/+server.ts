import type { RequestHandler } from '@sveltejs/kit';
import { openScan } from '$lib/domain/upload/upload.commands.server';
import { Refusal } from '$lib/refusal';
import { fault, problem } from '$lib/server/api/problem';
import { attachment } from '$lib/server/attachment';

/** A scan as it was sent: a file to be kept, never shown in place. */
export const GET: RequestHandler = async ({ params, locals }) => {
	try {
		if (!locals.actor) throw new Refusal('NOT_SIGNED_IN');
		const { bytes, name, type } = await openScan(
			locals.actor,
			params.study as string,
			params.scan as string
		);
		return attachment(bytes, name, type);
	} catch (thrown) {
		if (thrown instanceof Refusal) return problem(thrown, locals.requestId);
		return fault(thrown, locals.requestId);
	}
};
