import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, changeOwn, type Writer } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { isOver } from './job';
import { getJob } from './job.reads.server';

/**
 * Asks a job to stop: who asked for it may, and the administrator. The job hears it at its next sign of progress, so
 * that it stops at a place where nothing is half done.
 */
export async function cancelJob(actor: Actor, jobId: string): Promise<void> {
	const job = await getJob(actor, jobId);
	if (isOver(job.status)) throw new Refusal('JOB_OVER');
	const all = may(actor.grants, 'job.read', {});
	const ask = async (writer: Writer) => {
		const asked = await writer
			.updateTable('job_run')
			.set({ cancel_asked: true })
			.where('id', '=', jobId)
			.where('status', 'in', ['waiting', 'running'])
			.$if(!all, (q) => q.where('requested_by', '=', actor.personId))
			.returning('id')
			.execute();
		if (asked.length === 0) throw new Refusal('NOT_PERMITTED');
	};
	await (all ? change(actor, 'job.read', {}, ask) : changeOwn(actor, 'job.cancel', ask));
}
