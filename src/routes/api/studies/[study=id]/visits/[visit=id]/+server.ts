import { z } from 'zod';
import { getVisitForm } from '$lib/domain/measurement/visit-form.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'A visit, its planned measures and what is kept of them',
	response: z.looseObject({ visit: z.looseObject({ id: z.string() }) }),
	handle: async ({ actor, params }) => ({
		...(await getVisitForm(actor, params.study as string, params.visit as string))
	})
});
