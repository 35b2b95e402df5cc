import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, read, type Reader } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { clock } from '$lib/time/clock';
import type { RecommendationInput } from './board.input';

export interface Pack {
	reportId: string;
	look: number;
	kind: 'open' | 'closed';
	pages: number | null;
	/** Null to the team, of a closed report. */
	cut: { label: string; cutOffAt: string; fingerprint: string } | null;
	/** Whether the own copy is there to be taken. */
	ready: boolean;
	downloads: number;
	/** For the team: to whom it went. */
	people: { name: string; status: string; downloads: number }[];
}

export interface Recommendation {
	id: string;
	reportId: string;
	look: number;
	advice: string;
	reason: string;
	meetingOn: string;
	attendees: string;
	recordedBy: string;
	recordedAt: string;
}

async function releasesIn(reader: Reader, studyId: string, personId: string | null) {
	return reader
		.selectFrom('release')
		.innerJoin('report', 'report.id', 'release.report_id')
		.innerJoin('look', 'look.id', 'report.look_id')
		.innerJoin('cut', 'cut.id', 'look.cut_id')
		.innerJoin('person', 'person.id', 'release.person_id')
		.select((eb) => [
			'report.id as report_id',
			'report.kind',
			'report.pages',
			'look.number',
			'cut.fingerprint',
			'cut.label',
			'cut.cut_off_at',
			'release.status',
			'person.name',
			eb
				.selectFrom('download')
				.select((count) => count.fn.countAll<string>().as('n'))
				.whereRef('download.report_id', '=', 'report.id')
				.whereRef('download.person_id', '=', 'release.person_id')
				.as('downloads')
		])
		.where('release.study_id', '=', studyId)
		.$if(personId !== null, (q) => q.where('release.person_id', '=', personId as string))
		.orderBy('look.number', 'desc')
		.orderBy('person.name')
		.execute();
}

/**
 * The board room. A board member sees the packs released to them and the recommendations on those; the team sees which
 * packs went to whom, and what was advised.
 */
export const findBoardRoom = (
	actor: Actor,
	studyId: string
): Promise<{ packs: Pack[]; recommendations: Recommendation[]; member: boolean }> =>
	read(actor, 'board.read', { studyId }, async (reader) => {
		const member = may(actor.grants, 'board.download', { studyId });
		const found = await releasesIn(reader, studyId, member ? actor.personId : null);
		const packs = new Map<string, Pack>();
		for (const row of found) {
			const downloads = Number(row.downloads ?? 0);
			// Of a closed report the team learns that it is, and to whom it went.
			const told = member || row.kind === 'open';
			const pack = packs.get(row.report_id) ?? {
				reportId: row.report_id,
				look: row.number,
				kind: row.kind,
				pages: told ? row.pages : null,
				cut: told
					? {
							label: row.label,
							cutOffAt: row.cut_off_at.toISOString(),
							fingerprint: row.fingerprint
						}
					: null,
				ready: false,
				downloads: 0,
				people: []
			};
			if (member) {
				// What waits for approval, or for its copy, is not there yet.
				pack.ready = row.status === 'ready';
				pack.downloads = downloads;
			} else pack.people.push({ name: row.name, status: row.status, downloads });
			if (!member || row.status === 'ready' || row.status === 'approved')
				packs.set(row.report_id, pack);
		}
		const shown = [...packs.values()];
		const recommendations =
			shown.length === 0
				? []
				: await reader
						.selectFrom('recommendation')
						.innerJoin('person', 'person.id', 'recommendation.recorded_by')
						.selectAll('recommendation')
						.select('person.name')
						.where('recommendation.study_id', '=', studyId)
						.where(
							'report_id',
							'in',
							shown.map(({ reportId }) => reportId)
						)
						.orderBy('recorded_at', 'desc')
						.execute();
		return {
			member,
			packs: shown,
			recommendations: recommendations.map((row) => ({
				id: row.id,
				reportId: row.report_id,
				look: packs.get(row.report_id)?.look ?? 0,
				advice: row.advice,
				reason: row.reason,
				meetingOn: row.meeting_on,
				attendees: row.attendees,
				recordedBy: row.name,
				recordedAt: row.recorded_at.toISOString()
			}))
		};
	});

/** What the board advises on a pack that was released to this member. */
export const recommend = (
	actor: Actor,
	studyId: string,
	input: RecommendationInput
): Promise<{ id: string }> =>
	change(actor, 'board.recommend', { studyId }, async (writer) => {
		const release = await writer
			.selectFrom('release')
			.select('id')
			.where('study_id', '=', studyId)
			.where('report_id', '=', input.reportId)
			.where('person_id', '=', actor.personId)
			.where('status', '=', 'ready')
			.executeTakeFirst();
		if (!release) throw new Refusal('NOT_RELEASED');
		if (input.meetingOn > clock.now().toISOString().slice(0, 10))
			throw new Refusal(
				'FUTURE',
				{ what: 'The meeting' },
				{ meetingOn: 'The meeting lies in the future.' }
			);
		const id = newId();
		await writer
			.insertInto('recommendation')
			.values({
				id,
				study_id: studyId,
				report_id: input.reportId,
				advice: input.advice,
				reason: input.reason,
				meeting_on: input.meetingOn,
				attendees: input.attendees,
				recorded_by: actor.personId
			})
			.execute();
		return { id };
	});
