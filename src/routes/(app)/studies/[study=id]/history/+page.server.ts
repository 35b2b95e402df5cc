import { historyQuery } from '$lib/domain/audit/audit.input';
import { getHistory } from '$lib/domain/audit/audit.reads.server';
import { recordName } from '$lib/domain/audit/words';
import { Refusal } from '$lib/refusal';
import { actorOf, serve } from '$lib/server/serve';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	return serve(async () => {
		const asked = historyQuery.safeParse(Object.fromEntries(url.searchParams));
		if (!asked.success) throw new Refusal('NOT_FOUND');
		const { record, id } = asked.data;
		return { of: recordName(record), events: await getHistory(actor, params.study, record, id) };
	});
};
