import { makeFeed, revokeFeed } from '$lib/domain/feed/feed.commands.server';
import { makeFeedInput } from '$lib/domain/feed/feed.input';
import { findFeed } from '$lib/domain/feed/feed.reads.server';
import { windowsQuery, type WindowsQuery } from '$lib/domain/visit/windows.input';
import { findWindows } from '$lib/domain/visit/windows.reads.server';
import { findSitesWhere } from '$lib/domain/study/sites.server';
import { feedAddress } from '$lib/server/feed-address';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import { z } from 'zod';
import type { Actions, PageServerLoad } from './$types';

/** What the address asks for; what it asks wrongly is left out rather than refused. */
function asked(params: URLSearchParams): WindowsQuery {
	const one = (name: 'site' | 'what' | 'text') => {
		const read = windowsQuery.shape[name].safeParse(params.get(name) ?? undefined);
		return read.success ? { [name]: read.data } : {};
	};
	return windowsQuery.parse({ ...one('site'), ...one('what'), ...one('text') });
}

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const studyId = params.study;
	const query = asked(url.searchParams);
	return serve(async () => {
		const sites = await findSitesWhere(actor, studyId, 'subject.read');
		if (query.site !== '' && !sites.some((site) => site.id === query.site)) query.site = '';
		const mayHaveFeed = may(actor.grants, 'feed.own', { studyId });
		const [first, feed, feedForm] = await Promise.all([
			findWindows(actor, studyId, query),
			mayHaveFeed ? findFeed(actor, studyId) : null,
			formFor(makeFeedInput, { siteId: '' }, 'feed')
		]);
		return {
			query: { site: query.site, what: query.what, text: query.text },
			sites,
			first,
			may: {
				book: may(actor.grants, 'visit.book', { studyId }),
				chase: may(actor.grants, 'visit.chase', { studyId }),
				feed: mayHaveFeed
			},
			feed,
			feedForm,
			feedSites: mayHaveFeed ? await findSitesWhere(actor, studyId, 'feed.own') : []
		};
	});
};

const nothing = z.strictObject({});

export const actions: Actions = {
	feed: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const made: { address?: string } = {};
		const answer = await submit(
			request,
			makeFeedInput,
			async (data) => {
				made.address = feedAddress((await makeFeed(actor, params.study, data)).token);
				return 'Your calendar has an address. Copy it now: it is shown this once.';
			},
			'feed'
		);
		// Beside the form, so that it is shown once and never filled in again.
		return { ...answer, ...made };
	},
	revoke: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		return submit(
			request,
			nothing,
			async () => {
				await revokeFeed(actor, params.study);
				return 'The address is revoked. Calendar programs find nothing there any more.';
			},
			'feed'
		);
	}
};
