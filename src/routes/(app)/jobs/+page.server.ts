import { cancelJob } from '$lib/domain/job/job.commands.server';
import { cancelInput } from '$lib/domain/job/job.input';
import { listJobs, mailState } from '$lib/domain/job/job.reads.server';
import { submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals }) => {
	const actor = actorOf({ locals });
	const [first, mail] = await Promise.all([
		serve(() => listJobs(actor, { limit: 50 })),
		serve(() => mailState(actor))
	]);
	return { first, mail };
};

export const actions: Actions = {
	cancel: (event) =>
		submit(event.request, cancelInput, async ({ jobId }) => {
			await cancelJob(actorOf(event), jobId);
			return 'The job was asked to stop.';
		})
};
