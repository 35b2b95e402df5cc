import { whoFollows } from '$lib/domain/amendment/amendment.commands.server';
import { followVersion } from '$lib/domain/amendment/follow.server';
import { newestOf, publishedVersions } from '$lib/domain/amendment/versions.reads.server';
import { actorFor } from '../auth/actor';
import { change, read } from '../change';
import { supervised } from '../jobs/run';
import type { Delivery } from '../jobs/worker';

const batch = 25;

/**
 * Everybody who need not be asked again follows the newest version, some at a time. Whoever follows already is not
 * found again, so a try after a broken one goes on where that one stopped.
 */
export async function amendmentJob({ payload, lastTry }: Delivery<'amendment'>): Promise<void> {
	const { studyId, jobRunId } = payload;
	await supervised(jobRunId, lastTry, async ({ progress }, requestedBy) => {
		const actor = await actorFor(requestedBy, jobRunId);
		const { newest, who } = await read(actor, 'study.publish', { studyId }, async (reader) => {
			const versions = await publishedVersions(reader, studyId);
			return { newest: newestOf(versions), who: await whoFollows(reader, studyId, versions) };
		});
		for (let at = 0; at < who.length; at += batch) {
			await progress(at / who.length, `${at} of ${who.length} subjects follow it.`);
			await change(
				actor,
				'study.publish',
				{ studyId },
				async (writer) => {
					for (const id of who.slice(at, at + batch))
						await followVersion(writer, studyId, id, newest.id);
				},
				{ reason: `Follows protocol version ${newest.number}: nobody is asked again.` }
			);
		}
	});
}
