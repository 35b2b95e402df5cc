import {
	loseKit,
	planKits,
	receiveKits,
	sendKits,
	setKitLevel
} from '$lib/domain/kit/kit.commands.server';
import {
	kitFateForm,
	kitFateInput,
	kitLevelForm,
	kitPlanForm,
	receiveForm,
	sendKitsForm
} from '$lib/domain/kit/kit.input';
import { getKitStock } from '$lib/domain/kit/kit.reads.server';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const stock = await serve(() => getKitStock(actor, params.study));
	const mayPlan = may(actor.grants, 'kit.plan', { studyId: params.study });
	return {
		stock,
		mayPlan,
		mayKeep: may(actor.grants, 'kit.keep', { studyId: params.study }),
		plan: await formFor(kitPlanForm, {}, 'plan'),
		send: await formFor(sendKitsForm, {}, 'send'),
		fate: await formFor(kitFateForm, {}, 'fate'),
		receive: await formFor(receiveForm, {}, 'receive'),
		levels: mayPlan
			? await Promise.all(
					stock.sites.map((site) =>
						formFor(
							kitLevelForm,
							{
								siteId: site.siteId,
								fullStock: site.fullStock ?? 20,
								resupplyAt: site.resupplyAt ?? 14,
								version: site.version
							},
							`level-${site.siteId}`
						)
					)
				)
			: []
	};
};

export const actions: Actions = {
	plan: ({ request, locals, params }) =>
		submit(
			request,
			kitPlanForm,
			async (data) => {
				await planKits(actorOf({ locals }), params.study, data);
				return 'Kits are counted from now on. Say how many each site holds.';
			},
			'plan'
		),
	level: async ({ request, locals, params, url }) =>
		submit(
			request,
			kitLevelForm,
			async (data) => {
				await setKitLevel(actorOf({ locals }), params.study, data);
				return 'Saved.';
			},
			url.searchParams.get('form') ?? 'level'
		),
	send: ({ request, locals, params }) =>
		submit(
			request,
			sendKitsForm,
			async (data) => {
				const { kits } = await sendKits(actorOf({ locals }), params.study, data);
				return `${kits} kits are on their way.`;
			},
			'send'
		),
	receive: ({ request, locals, params }) =>
		submit(
			request,
			receiveForm,
			async ({ deliveryId }) => {
				const { kits } = await receiveKits(actorOf({ locals }), params.study, deliveryId);
				return `${kits} kits received. Say below if one of them is damaged or missing.`;
			},
			'receive'
		),
	fate: ({ request, locals, params }) =>
		submit(
			request,
			kitFateForm,
			async (data) => {
				const { kitNumber } = await loseKit(
					actorOf({ locals }),
					params.study,
					kitFateInput.parse(data)
				);
				return `Kit ${kitNumber} is out of the stock.`;
			},
			'fate'
		)
};
