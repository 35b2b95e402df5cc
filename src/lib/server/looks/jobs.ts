import { contentOf } from '$lib/domain/cut/cut.reads.server';
import { lookSpec } from '$lib/domain/look/look.input';
import type { LookRefused, LookResult } from '$lib/domain/look/result';
import { Refusal } from '$lib/refusal';
import { clock } from '$lib/time/clock';
import { systemActor } from '../actor';
import { change, read } from '../change';
import type { JobStatus } from '../db/tables';
import { Cancelled, supervised, type Supervision } from '../jobs/run';
import type { Delivery } from '../jobs/worker';
import { log } from '../log';
import { answerLook } from './answer';
import { lettersOf } from './letters';

const neutral = 'The look could not be made. The independent statistician can read why.';

const setLook = (
	actorId: string,
	lookId: string,
	values: { status: JobStatus; error?: string | null; engine_version?: string; finished_at?: Date }
) =>
	change(systemActor(actorId), 'job.read', {}, (writer) =>
		writer.updateTable('look').set(values).where('id', '=', lookId).execute()
	);

const findLook = (actorId: string, lookId: string) =>
	read(systemActor(actorId), 'job.read', {}, async (reader) => {
		const look = await reader
			.selectFrom('look')
			.select(['id', 'study_id', 'cut_id', 'kind', 'spec', 'status'])
			.where('id', '=', lookId)
			.executeTakeFirst();
		if (!look) throw new Refusal('NOT_FOUND');
		return look;
	});

const cutOf = (actorId: string, studyId: string, cutId: string) =>
	read(systemActor(actorId), 'job.read', {}, (reader) => contentOf(reader, studyId, cutId));

/**
 * A look follows its job: done, failed, or cancelled (also before it began). `say` is what the open row may hold of a
 * failure.
 */
async function followed(
	{ payload: { lookId, jobRunId }, lastTry }: Delivery<'look' | 'by-arm-look'>,
	say: (thrown: unknown) => string,
	work: (supervision: Supervision) => Promise<void>
): Promise<void> {
	const end = (status: JobStatus, error: string | null) =>
		setLook(jobRunId, lookId, { status, error, finished_at: clock.now() });
	try {
		await supervised(jobRunId, lastTry, async (supervision) => {
			await setLook(jobRunId, lookId, { status: 'running', error: null });
			await work(supervision);
		});
	} catch (thrown) {
		if (lastTry || thrown instanceof Refusal) await end('failed', say(thrown));
		throw thrown;
	}
	const run = await read(systemActor(jobRunId), 'job.read', {}, (reader) =>
		reader.selectFrom('job_run').select('status').where('id', '=', jobRunId).executeTakeFirst()
	);
	if (run?.status === 'cancelled') await end('cancelled', null);
}

/** The ordinary worker's: pooled, or by a characteristic. */
export const lookJob = (delivery: Delivery<'look'>): Promise<void> =>
	followed(
		delivery,
		(thrown) =>
			thrown instanceof Refusal
				? thrown.message
				: 'The fit failed. The administrator’s log says why.',
		async (supervision) => {
			const { lookId, jobRunId } = delivery.payload;
			const look = await findLook(jobRunId, lookId);
			await supervision.progress(0.05, 'Reading the cut.');
			const { content } = await cutOf(jobRunId, look.study_id, look.cut_id);
			const { result, inputHash } = await answerLook(
				content,
				lookSpec.parse(look.spec),
				null,
				supervision
			);
			await supervision.progress(0.95, 'Keeping the result.');
			await change(systemActor(jobRunId), 'job.read', {}, (writer) =>
				writer
					.updateTable('look')
					.set({
						status: 'done',
						error: null,
						result: JSON.stringify(result),
						input_hash: inputHash,
						engine_version: result.growth.engineVersion,
						finished_at: clock.now()
					})
					.where('id', '=', lookId)
					.execute()
			);
		}
	);

const keepClosed = (
	actorId: string,
	look: { id: string; study_id: string },
	result: LookResult | LookRefused,
	inputHash: string
) =>
	change(systemActor(actorId), 'job.read', {}, (writer) =>
		writer
			.insertInto('closed.look_result')
			.values({
				look_id: look.id,
				study_id: look.study_id,
				result: JSON.stringify(result),
				input_hash: inputHash
			})
			// Delivered twice: the first answer stands.
			.onConflict((conflict) => conflict.doNothing())
			.execute()
	);

/** The look worker's: by arm. What it finds, and why it may find nothing, goes to the closed area alone. */
export const byArmLookJob = (delivery: Delivery<'by-arm-look'>): Promise<void> =>
	followed(
		delivery,
		() => neutral,
		async (supervision) => {
			const { lookId, jobRunId } = delivery.payload;
			const look = await findLook(jobRunId, lookId);
			await supervision.progress(0.05, 'Reading the cut.');
			try {
				const request = await read(systemActor(jobRunId), 'job.read', {}, (reader) =>
					reader
						.selectFrom('closed.look_request')
						.select('spec')
						.where('look_id', '=', lookId)
						.executeTakeFirstOrThrow()
				);
				const { content } = await cutOf(jobRunId, look.study_id, look.cut_id);
				const letters = await read(systemActor(jobRunId), 'job.read', {}, (reader) =>
					lettersOf(reader, look.study_id, look.cut_id)
				);
				const { result, inputHash } = await answerLook(
					content,
					lookSpec.parse(request.spec),
					letters.of,
					supervision
				);
				await keepClosed(jobRunId, look, result, inputHash);
				await setLook(jobRunId, lookId, {
					status: 'done',
					error: null,
					engine_version: result.growth.engineVersion,
					finished_at: clock.now()
				});
			} catch (thrown) {
				if (thrown instanceof Cancelled) throw thrown;
				if (thrown instanceof Refusal) {
					await keepClosed(jobRunId, look, { refused: thrown.message }, '');
					throw new Refusal('NOT_ANALYSABLE', { why: neutral });
				}
				// The job's own record is open: a fault's words might carry what the fit saw.
				log.error({ errorName: (thrown as Error)?.name, look: lookId }, 'by-arm look');
				// eslint-disable-next-line preserve-caught-error -- a cause would carry those words along
				throw new Error(neutral);
			}
		}
	);
