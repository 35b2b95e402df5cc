import { z } from 'zod';
import { approveSite } from '$lib/domain/site/site.commands.server';
import { approvalInput } from '$lib/domain/site/site.input';
import { endpoint } from '$lib/server/api/endpoint';

export const PUT = endpoint({
	summary: 'Records the day of the site’s approval, from which subjects may be enrolled there.',
	body: approvalInput,
	response: z.object({ version: z.number() }),
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		approveSite(actor, params.study as string, params.site as string, body, version)
});
