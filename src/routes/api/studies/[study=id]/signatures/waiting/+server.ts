import { waitingToSign } from '$lib/domain/signature/signature.input';
import { findWaiting } from '$lib/domain/signature/signature.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'What waits for your signature: each record as it would be signed, with its hash.',
	response: waitingToSign,
	handle: ({ actor, params }) => findWaiting(actor, params.study as string)
});
