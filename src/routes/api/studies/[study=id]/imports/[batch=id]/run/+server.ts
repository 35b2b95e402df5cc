import { startImport } from '$lib/domain/import/import.commands.server';
import { startedOutput } from '$lib/domain/import/import.output';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Begins the import, whole or not at all, of a file whose check found no problem.',
	response: startedOutput,
	status: 202,
	handle: ({ actor, params }) =>
		startImport(actor, params.study as string, params.batch as string, { dryRun: false })
});
