import { newId, newToken } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, type Writer } from '$lib/server/change';
import { tokenHash } from '$lib/server/secret';
import { clock } from '$lib/time/clock';
import type { MakeFeedInput } from './feed.input';

const close = (writer: Writer, actor: Actor, studyId: string) =>
	writer
		.updateTable('feed')
		.set({ revoked_at: clock.now() })
		.where('person_id', '=', actor.personId)
		.where('study_id', '=', studyId)
		.where('revoked_at', 'is', null)
		.returning('id')
		.execute();

/** A new secret address for one's calendar; an older one stops working at once. The token is told this one time. */
export const makeFeed = (
	actor: Actor,
	studyId: string,
	input: MakeFeedInput
): Promise<{ token: string }> => {
	const siteId = input.siteId === '' ? null : input.siteId;
	return change(actor, 'feed.own', { studyId, siteId }, async (writer) => {
		if (siteId !== null) {
			const site = await writer
				.selectFrom('site')
				.select('id')
				.where('study_id', '=', studyId)
				.where('id', '=', siteId)
				.executeTakeFirst();
			if (!site) throw new Refusal('NOT_FOUND');
		}
		await close(writer, actor, studyId);
		const token = newToken();
		await writer
			.insertInto('feed')
			.values({
				id: newId(),
				person_id: actor.personId,
				study_id: studyId,
				site_id: siteId,
				token_hash: tokenHash(token)
			})
			.execute();
		return { token };
	});
};

export const revokeFeed = (actor: Actor, studyId: string): Promise<{ revoked: number }> =>
	change(actor, 'feed.own', { studyId }, async (writer) => ({
		revoked: (await close(writer, actor, studyId)).length
	}));
