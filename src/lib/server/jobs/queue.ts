import type { QueryExecutorProvider } from 'kysely';
import { CompiledQuery } from 'kysely';
import PgBoss from 'pg-boss';
import { database } from '../db/db';

/**
 * The queues and what each job carries: ids only, never data. The owner makes the queues when migrating; the
 * application may fill and empty them.
 */
export interface QueuePayloads {
	mail: { mailId: string };
	import: { batchId: string; jobRunId: string; dryRun: boolean };
	/** Subjects follow a new protocol version. */
	amendment: { studyId: string; jobRunId: string };
	look: { lookId: string; jobRunId: string };
	report: { reportId: string; jobRunId: string };
	release: { releaseId: string };
	/** For the look worker alone. */
	'allocation-list': { studyId: string; askedBy: string; jobRunId: string };
	'by-arm-look': { lookId: string; jobRunId: string };
	'closed-report': { reportId: string; jobRunId: string };
	'closed-release': { releaseId: string };
	'sealed-codes': { printId: string; jobRunId: string };
	/** Seals the audit trail; scheduled. */
	seal: Record<string, never>;
}
export type QueueName = keyof QueuePayloads;

const minute = 60;
const retry = { retryLimit: 5, retryDelay: 5, retryBackoff: true } as const;
const once = { retryLimit: 0 } as const;

export const queueSettings: Record<
	QueueName,
	{
		retryLimit: number;
		retryDelay?: number;
		retryBackoff?: boolean;
		/** A job that runs longer is taken to have died with its worker and is tried again: longer than it ever takes. */
		expireInSeconds: number;
	}
> = {
	mail: { ...retry, retryLimit: 8, expireInSeconds: 5 * minute },
	// All of it or nothing, so that a worker that died may be followed by another.
	import: { ...retry, retryLimit: 1, expireInSeconds: 30 * minute },
	amendment: { ...retry, retryLimit: 2, expireInSeconds: 30 * minute },
	look: { ...retry, retryLimit: 2, expireInSeconds: 30 * minute },
	report: { ...retry, retryLimit: 2, expireInSeconds: 10 * minute },
	release: { ...retry, expireInSeconds: 10 * minute },
	'allocation-list': { ...retry, retryLimit: 2, expireInSeconds: 10 * minute },
	'by-arm-look': { ...retry, retryLimit: 2, expireInSeconds: 30 * minute },
	'closed-report': { ...retry, retryLimit: 2, expireInSeconds: 10 * minute },
	'closed-release': { ...retry, expireInSeconds: 10 * minute },
	'sealed-codes': { ...retry, retryLimit: 2, expireInSeconds: 10 * minute },
	seal: { ...once, expireInSeconds: 10 * minute }
};

/** Makes the queue's tables and queues, as the owner. */
export async function installQueues(ownerUrl: string): Promise<void> {
	const boss = new PgBoss({
		connectionString: ownerUrl,
		schema: 'queue',
		supervise: false,
		schedule: false,
		max: 2
	});
	boss.on('error', () => {});
	await boss.start();
	for (const [name, settings] of Object.entries(queueSettings)) {
		if (await boss.getQueue(name))
			await boss.updateQueue(name, { name, policy: 'standard', ...settings });
		else await boss.createQueue(name, { name, policy: 'standard', ...settings });
	}
	await boss.stop({ graceful: false, wait: true });
}

let sender: PgBoss | undefined;

/**
 * One for the process; it only sends, each time on the caller's own transaction. So it is not started: that would ask for a
 * further connection, and when all of them wait for this very transaction there is none.
 */
function sending(): PgBoss {
	if (sender) return sender;
	const { pool } = database();
	sender = new PgBoss({
		db: { executeSql: (text, values) => pool.query(text, values as unknown[]) },
		schema: 'queue',
		migrate: false,
		supervise: false,
		schedule: false
	});
	sender.on('error', () => {});
	return sender;
}

/** Forgets the sender: for tests that change databases. */
export function forgetSender(): void {
	sender = undefined;
}

export interface EnqueueOptions {
	/** Somebody waits for it: before the others of its queue. */
	urgent?: boolean;
}

/** Adds a job in the given transaction. */
export async function enqueue<Q extends QueueName>(
	on: QueryExecutorProvider,
	queue: Q,
	payload: QueuePayloads[Q],
	options: EnqueueOptions = {}
): Promise<void> {
	const boss = sending();
	const executor = on.getExecutor();
	await boss.send(queue, payload, {
		...(options.urgent ? { priority: 1 } : {}),
		db: {
			executeSql: async (text: string, values: unknown[]) =>
				executor.executeQuery(CompiledQuery.raw(text, values)) as never
		}
	});
}
