import PgBoss from 'pg-boss';
import { Refusal } from '$lib/refusal';
import { log } from '../log';
import { queueSettings, type QueueName, type QueuePayloads } from './queue';

export interface Delivery<Q extends QueueName> {
	payload: QueuePayloads[Q];
	/** No further try follows: what fails now has failed. */
	lastTry: boolean;
}

export type Handlers = { [Q in QueueName]?: (delivery: Delivery<Q>) => Promise<void> };

/** Takes jobs of the given queues until stopped. A refusal is final; any other failure is tried again as the queue says. */
export async function startWorker(
	connectionString: string,
	handlers: Handlers,
	schedules: Partial<Record<QueueName, string>> = {}
): Promise<{ stop(): Promise<void> }> {
	const boss = new PgBoss({
		connectionString,
		schema: 'queue',
		migrate: false,
		max: 4
	});
	boss.on('error', (error) => log.error({ err: error }, 'queue'));
	await boss.start();
	for (const [queue, cron] of Object.entries(schedules))
		await boss.schedule(queue, cron, {}, { tz: 'UTC' });
	for (const [name, handler] of Object.entries(handlers)) {
		const queue = name as QueueName;
		const tries = queueSettings[queue].retryLimit;
		// A mail waits for the other side most of the time: several at once.
		for (let hand = 0; hand < (queue === 'mail' ? 4 : 1); hand++)
			await boss.work(
				queue,
				{ batchSize: 1, pollingIntervalSeconds: 0.5, includeMetadata: true },
				async (jobs: PgBoss.JobWithMetadata<object>[]) => {
					for (const job of jobs) {
						try {
							await (handler as (d: Delivery<QueueName>) => Promise<void>)({
								payload: job.data as QueuePayloads[QueueName],
								lastTry: job.retryCount >= tries
							});
						} catch (error) {
							log.error({ err: error, queue, job: job.id, retry: job.retryCount }, 'job failed');
							if (!(error instanceof Refusal)) throw error;
						}
					}
				}
			);
	}
	return { stop: () => boss.stop({ graceful: true, wait: true, timeout: 20_000 }) };
}
