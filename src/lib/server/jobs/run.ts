import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import { clock } from '$lib/time/clock';
import type { Actor } from '../actor';
import { systemActor } from '../actor';
import { change, read, type Writer } from '../change';
import { log } from '../log';
import type { QueueName } from './queue';

/** What a job tells while it works, and is told. Times are in milliseconds. */
export interface Supervision {
	progress(fraction: number, message: string): Promise<void>;
	/** Whether somebody asked to cancel, as last heard. */
	cancelAsked(): boolean;
}

export class Cancelled extends Error {}

interface NewRun {
	queue: QueueName;
	title: string;
	studyId: string | null;
}

/** Makes the job's visible record in the same transaction as the job. */
export async function beginRun(writer: Writer, actor: Actor, run: NewRun): Promise<string> {
	const id = newId();
	await writer
		.insertInto('job_run')
		.values({
			id,
			queue: run.queue,
			title: run.title,
			study_id: run.studyId,
			requested_by: actor.personId
		})
		.execute();
	return id;
}

async function set(
	id: string,
	values: Partial<{
		status: 'waiting' | 'running' | 'done' | 'failed' | 'cancelled';
		fraction: number;
		message: string;
		attempts: number;
		started_at: Date;
		finished_at: Date;
		error: string | null;
		result: string;
	}>
): Promise<{ cancel_asked: boolean; requested_by: string; attempts: number } | undefined> {
	return change(systemActor(id), 'job.read', {}, (writer) =>
		writer
			.updateTable('job_run')
			.set(values)
			.where('id', '=', id)
			.returning(['cancel_asked', 'requested_by', 'attempts'])
			.executeTakeFirst()
	);
}

/** How often progress is written down: often enough to watch, seldom enough to cost nothing. */
const everyMs = 400;

/**
 * Runs a job's work with its record: running, progress, then done, cancelled or failed. A failure is thrown on, so that the
 * queue may try again; the last try leaves the record failed.
 */
export async function supervised<T>(
	id: string,
	lastTry: boolean,
	work: (supervision: Supervision, requestedBy: string) => Promise<T>
): Promise<T | undefined> {
	const before = await read(systemActor(id), 'job.read', {}, (reader) =>
		reader
			.selectFrom('job_run')
			.select(['status', 'attempts', 'cancel_asked'])
			.where('id', '=', id)
			.executeTakeFirst()
	);
	// Delivered again after it was over: a job may run twice without harm.
	if (!before || before.status === 'done' || before.status === 'cancelled') return undefined;
	const row = await set(id, {
		status: 'running',
		started_at: clock.now(),
		attempts: before.attempts + 1,
		error: null
	});
	if (!row) return undefined;
	let asked = row.cancel_asked;
	let written = 0;
	const supervision: Supervision = {
		cancelAsked: () => asked,
		async progress(fraction, message) {
			if (asked) throw new Cancelled();
			const now = performance.now();
			if (now - written < everyMs && fraction < 1) return;
			written = now;
			asked =
				(await set(id, { fraction: Math.min(1, Math.max(0, fraction)), message }))?.cancel_asked ??
				true;
			if (asked) throw new Cancelled();
		}
	};
	try {
		if (asked) throw new Cancelled();
		const result = await work(supervision, row.requested_by);
		await set(id, { status: 'done', fraction: 1, message: 'Done.', finished_at: clock.now() });
		return result;
	} catch (thrown) {
		if (thrown instanceof Cancelled) {
			await set(id, {
				status: 'cancelled',
				message: 'Cancelled; nothing was kept of it.',
				finished_at: clock.now()
			});
			return undefined;
		}
		// A fault's own words may quote a row; the administrator's page holds no study data.
		const why =
			thrown instanceof Refusal
				? thrown.message
				: `A fault on our side. The log has it under ${id}.`;
		if (!(thrown instanceof Refusal)) log.error({ err: thrown, jobRunId: id }, 'job fault');
		await set(
			id,
			lastTry || thrown instanceof Refusal
				? { status: 'failed', error: why.slice(0, 1000), finished_at: clock.now() }
				: {
						status: 'waiting',
						message: 'It failed and will be tried again.',
						error: why.slice(0, 1000)
					}
		);
		throw thrown;
	}
}
