import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { sitesAllowing } from '$lib/server/permission';
import { clock } from '$lib/time/clock';
import { addDays, plainDateOf, shortDateText } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';

export interface TransferNotice {
	id: string;
	subjectId: string;
	number: string;
	on: string;
	from: string;
	to: string;
	/** Came to one of the actor's sites; otherwise it went away from one. */
	came: boolean;
	reason: string;
}

/** For how long both sites are told on their Today. */
const toldDays = 14;

/** Subjects who came to or left the actor's sites lately. */
export const findTransfers = (actor: Actor, studyId: string): Promise<TransferNotice[]> =>
	read(actor, 'feed.own', { studyId }, async (reader) => {
		const sites = sitesAllowing(actor.grants, 'feed.own', studyId);
		const since = addDays(dateInZone(clock.now(), 'UTC'), -toldDays);
		const rows = await reader
			.selectFrom('transfer as m')
			.innerJoin('subject as s', 's.id', 'm.subject_id')
			.innerJoin('site as f', 'f.id', 'm.from_site_id')
			.innerJoin('site as t', 't.id', 'm.site_id')
			.select([
				'm.id',
				'm.subject_id',
				's.number',
				'm.transferred_on',
				'm.reason',
				'm.site_id',
				'f.name as from',
				't.name as to'
			])
			.where('m.study_id', '=', studyId)
			.where('m.made_at', '>=', new Date(`${since}T00:00:00Z`))
			.orderBy('m.made_at', 'desc')
			.limit(20)
			.execute();
		return rows.map((row) => ({
			id: row.id,
			subjectId: row.subject_id,
			number: row.number,
			on: shortDateText(plainDateOf(row.transferred_on)),
			from: row.from,
			to: row.to,
			came: sites === null || sites.includes(row.site_id),
			reason: row.reason
		}));
	});
