import { z } from 'zod';
import { auditEventOutput, historyQuery } from '$lib/domain/audit/audit.input';
import { getHistory } from '$lib/domain/audit/audit.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'Everything that happened to one record, oldest first',
	query: historyQuery,
	response: z.object({ items: z.array(auditEventOutput) }),
	handle: async ({ actor, params, query }) => ({
		items: await getHistory(actor, params.study ?? '', query.record, query.id)
	})
});
