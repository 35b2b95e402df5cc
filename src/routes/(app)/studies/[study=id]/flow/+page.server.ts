import { flowBreaks } from '$lib/domain/flow/flow';
import { flowChart, flowRows } from '$lib/domain/flow/flow-chart';
import { getFlow } from '$lib/domain/flow/flow.reads.server';
import { actorOf, serve } from '$lib/server/serve';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const view = await serve(() => getFlow(actorOf({ locals }), params.study));
	return {
		sites: view.sites,
		masked: view.masked,
		plan: view.plan,
		randomises: view.flow.randomises,
		chart: flowChart(view.flow),
		rows: flowRows(view.flow),
		breaks: flowBreaks(view.flow)
	};
};
