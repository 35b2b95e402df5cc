import { z } from 'zod';
import { approveRelease } from '$lib/domain/report/report.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Approves the release of a closed report that somebody else asked for.',
	response: z.object({ approved: z.literal(true) }),
	handle: async ({ actor, params }) => {
		await approveRelease(actor, params.study as string, params.release as string);
		return { approved: true as const };
	}
});
