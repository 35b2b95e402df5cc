import { approveSite, closeSite, reopenSite } from '$lib/domain/site/site.commands.server';
import { approvalForm, closureForm, reopenForm } from '$lib/domain/site/site.input';
import { findSiteViews } from '$lib/domain/site/site.reads.server';
import { openingWords } from '$lib/domain/study/words';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	return serve(async () => ({
		sites: await Promise.all(
			(await findSiteViews(actor, params.study)).map(async (site) => {
				const scope = { studyId: params.study, siteId: site.id };
				const { id: siteId, version } = site;
				return {
					id: site.id,
					code: site.code,
					name: site.name,
					zone: site.zone,
					opening: openingWords(site.opening),
					approved: site.approvedOn && shortDateText(plainDateOf(site.approvedOn)),
					closures: site.closures,
					version,
					approve: may(actor.grants, 'site.approve', scope)
						? await formFor(
								approvalForm,
								{ siteId, version, approvedOn: site.approvedOn ?? '' },
								`approve-${siteId}`
							)
						: null,
					close: may(actor.grants, 'site.close', scope)
						? await formFor(closureForm, { siteId, version }, `close-${siteId}`)
						: null
				};
			})
		)
	}));
};

export const actions: Actions = {
	approve: async ({ request, locals, params }) =>
		submit(request, approvalForm, async ({ siteId, version, ...input }) => {
			await approveSite(actorOf({ locals }), params.study, siteId, input, version);
			return 'The approval is recorded.';
		}),
	close: async ({ request, locals, params }) =>
		submit(request, closureForm, async ({ siteId, version, ...input }) => {
			await closeSite(actorOf({ locals }), params.study, siteId, input, version);
			return 'The site is closed on these days.';
		}),
	reopen: async ({ request, locals, params }) =>
		submit(request, reopenForm, async ({ siteId, version, ...input }) => {
			await reopenSite(actorOf({ locals }), params.study, siteId, input, version);
			return 'The closure is taken back.';
		})
};
