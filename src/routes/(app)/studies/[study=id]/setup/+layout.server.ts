import { getDraft } from '$lib/domain/study/draft.reads.server';
import { shownFindings } from '$lib/domain/study/shown-findings';
import { getStudy } from '$lib/domain/study/study.reads.server';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import { dateInZone } from '$lib/time/zones';
import type { LayoutServerLoad } from './$types';

/** The draft for all parts of set-up: it is read once, and the screen keeps it in step from there. */
export const load: LayoutServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const [draft, study] = await serve(() =>
		Promise.all([getDraft(actor, params.study), getStudy(actor, params.study)])
	);
	const { id, number, version, definition } = draft;
	return {
		study: { code: study.code, name: study.name, opened: draft.opened },
		number,
		draft:
			draft.status === 'draft'
				? { studyId: params.study, id, version, definition, findings: shownFindings(definition) }
				: null,
		today: dateInZone(clock.now(), definition.sites[0]?.zone ?? 'UTC')
	};
};
