import { importOutput } from '$lib/domain/import/import.output';
import { getImport } from '$lib/domain/import/import.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'One file: its mapping, what its check found, and how far the work is.',
	response: importOutput,
	handle: ({ actor, params }) => getImport(actor, params.study as string, params.batch as string)
});
