import { z } from 'zod';
import { closeSite, reopenSite } from '$lib/domain/site/site.commands.server';
import { closureInput, reopenInput } from '$lib/domain/site/site.input';
import { endpoint } from '$lib/server/api/endpoint';

const response = z.object({ version: z.number() });

export const POST = endpoint({
	summary: 'Closes the site on some days; appointments on them stay until they are moved.',
	body: closureInput,
	response,
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		closeSite(actor, params.study as string, params.site as string, body, version)
});

export const DELETE = endpoint({
	summary: 'Takes a closure back.',
	body: reopenInput,
	response,
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		reopenSite(actor, params.study as string, params.site as string, body, version)
});
