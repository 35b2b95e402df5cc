import { createHash } from 'node:crypto';
import { Refusal } from '$lib/refusal';
import { systemActor, type Actor } from '$lib/server/actor';
import { actorFor } from '$lib/server/auth/actor';
import { read, readOwn, type Reader } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { tokenHash } from '$lib/server/secret';
import { clock } from '$lib/time/clock';
import { instantText } from '$lib/time/zones';
import { feed, type FeedEvent } from '../calendar/calendar';

export interface FeedHead {
	since: string;
	/** Null: one's own visits. */
	site: string | null;
}

/** The actor's own feed in the study, if there is one; its address cannot be read back. */
export const findFeed = (actor: Actor, studyId: string): Promise<FeedHead | null> =>
	read(actor, 'feed.own', { studyId }, async (reader) => {
		const row = await reader
			.selectFrom('feed as f')
			.leftJoin('site as p', 'p.id', 'f.site_id')
			.select(['f.created_at', 'p.name'])
			.where('f.person_id', '=', actor.personId)
			.where('f.study_id', '=', studyId)
			.where('f.revoked_at', 'is', null)
			.executeTakeFirst();
		return row ? { since: instantText(row.created_at, 'UTC'), site: row.name } : null;
	});

const daysBack = 30;

/**
 * What stands behind a secret address now, or null: unknown, revoked, and a role that has ended answer alike. The mark
 * changes only when an appointment does, so that a calendar program that asks every hour gets nothing new.
 */
export async function readFeed(
	token: string,
	requestId: string
): Promise<{ text: string; mark: string } | null> {
	const row = await readOwn(systemActor(requestId), (reader) =>
		reader
			.selectFrom('feed')
			.select(['person_id', 'study_id', 'site_id'])
			.where('token_hash', '=', tokenHash(token))
			.where('revoked_at', 'is', null)
			.executeTakeFirst()
	);
	if (!row) return null;
	const actor = await actorFor(row.person_id, requestId).catch((thrown: unknown) => {
		if (thrown instanceof Refusal) return null;
		throw thrown;
	});
	const scope = { studyId: row.study_id, siteId: row.site_id };
	if (!actor || !may(actor.grants, 'feed.own', scope)) return null;
	const events = await read(actor, 'feed.own', scope, (reader) =>
		eventsOf(reader, row.study_id, row.site_id, actor.personId)
	);
	const file = feed(events, { now: clock.now() });
	if (!file.ok) throw new Error(file.problem.message);
	return {
		text: file.value.text,
		mark: createHash('sha256').update(JSON.stringify(events)).digest('base64url').slice(0, 27)
	};
}

async function eventsOf(
	reader: Reader,
	studyId: string,
	siteId: string | null,
	personId: string
): Promise<FeedEvent[]> {
	const rows = await reader
		.selectFrom('appointment as a')
		.innerJoin('room as r', 'r.id', 'a.room_id')
		.innerJoin('site as p', 'p.id', 'a.site_id')
		.select([
			'a.calendar_uid',
			'a.calendar_sequence',
			'a.starts_at',
			'a.ends_at',
			'a.changed_at',
			'r.name as room',
			'p.name as site'
		])
		.where('a.study_id', '=', studyId)
		.where('a.status', '!=', 'cancelled')
		.where('a.starts_at', '>', new Date(clock.now().getTime() - daysBack * 86_400_000))
		.where((where) =>
			siteId === null ? where('a.staff_id', '=', personId) : where('a.site_id', '=', siteId)
		)
		.orderBy('a.starts_at')
		.orderBy('a.id')
		.limit(2000)
		.execute();
	return rows.map((row) => ({
		uid: row.calendar_uid,
		sequence: row.calendar_sequence,
		start: row.starts_at,
		end: row.ends_at,
		place: `${row.room}, ${row.site}`,
		changed: row.changed_at
	}));
}
