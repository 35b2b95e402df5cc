import { auditPageOutput, auditQuery } from '$lib/domain/audit/audit.input';
import { listEvents } from '$lib/domain/audit/audit.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'The audit trail of a study, newest first',
	query: auditQuery,
	response: auditPageOutput,
	handle: ({ actor, params, query: { cursor, limit, ...filter } }) =>
		listEvents(actor, params.study ?? '', filter, { cursor, limit })
});
