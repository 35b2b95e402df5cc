import { fail } from '@sveltejs/kit';
import { getConsentForScan } from '$lib/domain/upload/upload.reads.server';
import { scanHint, scanLimits } from '$lib/domain/upload/scan';
import { Refusal } from '$lib/refusal';
import { actorOf, serve } from '$lib/server/serve';
import { receiveScan } from '$lib/server/uploads/form';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => ({
	...(await serve(() => getConsentForScan(actorOf({ locals }), params.study, params.consent))),
	hint: scanHint,
	most: scanLimits.bytes
});

export const actions: Actions = {
	default: async ({ locals, params, request }) => {
		try {
			await receiveScan(actorOf({ locals }), params.study, params.consent, request);
			return { kind: 'done' as const, text: 'The scan is kept.' };
		} catch (thrown) {
			if (!(thrown instanceof Refusal)) throw thrown;
			return fail(thrown.status, {
				kind: 'refused' as const,
				text: thrown.fields.file ?? thrown.fields.reason ?? thrown.message
			});
		}
	}
};
