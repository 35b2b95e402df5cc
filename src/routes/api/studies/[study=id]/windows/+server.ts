import { windowsPage, windowsQuery } from '$lib/domain/visit/windows.input';
import { findWindows } from '$lib/domain/visit/windows.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'Windows by time left',
	query: windowsQuery,
	response: windowsPage,
	handle: ({ actor, params, query }) => findWindows(actor, params.study as string, query)
});
