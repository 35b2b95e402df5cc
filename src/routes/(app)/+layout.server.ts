import { getStudy } from '$lib/domain/study/study.reads.server';
import { config } from '$lib/server/config';
import { generalLinks, roleWords, studyLinks } from '$lib/server/navigation';
import { serve } from '$lib/server/serve';
import type { LayoutServerLoad } from './$types';

/** Navigation only; no guard lives here. */
export const load: LayoutServerLoad = async ({ locals, params }) => {
	const { actor } = locals;
	const studyId = 'study' in params && typeof params.study === 'string' ? params.study : null;
	const study = actor && studyId ? await serve(() => getStudy(actor, studyId)) : null;
	return {
		me: locals.session && !locals.session.locked ? { name: locals.session.name } : null,
		idleMinutes: config().idleMinutes,
		training: study?.training ? 'Training study: nothing here is real.' : config().trainingBanner,
		study,
		roles: actor ? roleWords(actor.grants, studyId) : '',
		links: actor ? (study ? studyLinks(actor.grants, study.id) : generalLinks(actor.grants)) : []
	};
};
