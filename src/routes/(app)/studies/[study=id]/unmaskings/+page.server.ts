import { findUnmaskings } from '$lib/domain/unmasking/unmasking.reads.server';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	return {
		...(await serve(() => findUnmaskings(actor, params.study))),
		mayRead: may(actor.grants, 'subject.read', { studyId: params.study })
	};
};
