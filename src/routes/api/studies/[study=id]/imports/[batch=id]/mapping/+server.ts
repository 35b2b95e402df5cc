import { z } from 'zod';
import { mapImport } from '$lib/domain/import/import.commands.server';
import { importRequest } from '$lib/domain/import/import.input';
import { endpoint } from '$lib/server/api/endpoint';

export const PUT = endpoint({
	summary: 'Says which column holds what. Forgets a check that was made before.',
	body: importRequest,
	needsVersion: true,
	response: z.object({ version: z.number() }),
	handle: ({ actor, params, body, version }) =>
		mapImport(actor, params.study as string, params.batch as string, version, body)
});
