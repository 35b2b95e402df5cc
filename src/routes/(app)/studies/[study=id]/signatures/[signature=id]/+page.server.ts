import { getSignature } from '$lib/domain/signature/signature.reads.server';
import { actorOf, serve } from '$lib/server/serve';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => ({
	signature: await serve(() => getSignature(actorOf({ locals }), params.study, params.signature))
});
