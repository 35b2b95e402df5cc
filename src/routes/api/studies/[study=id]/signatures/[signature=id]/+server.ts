import { signatureDetail } from '$lib/domain/signature/signature.input';
import { getSignature } from '$lib/domain/signature/signature.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'One signature: who, what it means, when, what was signed, and whether it stands.',
	response: signatureDetail,
	handle: ({ actor, params }) =>
		getSignature(actor, params.study as string, params.signature as string)
});
