import { sql } from 'kysely';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { clock } from '$lib/time/clock';
import { addDays, plainDateOf, shortDateText, type PlainDate } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import { whoFollows } from '../amendment/amendment.commands.server';
import { askedAgainBy, reconsentWithinDays } from '../amendment/amendment';
import { publishedVersions, type PublishedVersion } from '../amendment/versions.reads.server';
import { sitesFor, type SiteHead } from '../study/sites.server';
import { majorityOf } from './consent';
import { birthDateOf, consentsOf } from './ground.server';

export interface ReconsentTask {
	subjectId: string;
	number: string;
	siteId: string;
	site: string;
	cause: 'amendment' | 'majority';
	/** In words: because of which version, or since when of age. */
	because: string;
	due: string;
	overdue: boolean;
	/** The day on which the subject said no. */
	refused: string | null;
}

export interface Reconsents {
	tasks: ReconsentTask[];
	/** People who follow an older version though nobody has to ask them: a broken-off job left them. */
	left: number;
	mayRecord: boolean;
	mayLetFollow: boolean;
}

interface Row {
	id: string;
	number: string;
	site_id: string;
	protocol_version_id: string;
	enrolled_on: string;
	characteristics: unknown;
}

/** Subjects in the study: enrolled, and not out of it. */
const active = sql<boolean>`not exists (select from app.study_exit x where x.subject_id = s.id
	and x.kind <> 'intervention discontinued' and x.taken_back_at is null)`;

async function refusals(reader: Reader, studyId: string) {
	const rows = await reader
		.selectFrom('reconsent_refusal')
		.select(['subject_id', 'protocol_version_id', 'refused_on'])
		.where('study_id', '=', studyId)
		.execute();
	return new Map(
		rows.map((row) => [`${row.subject_id} ${row.protocol_version_id ?? ''}`, row.refused_on])
	);
}

/** Who must be asked again because of an amendment. */
async function byAmendment(
	reader: Reader,
	studyId: string,
	sites: readonly SiteHead[],
	versions: readonly PublishedVersion[],
	refused: ReadonlyMap<string, string>,
	subjectId: string | null
): Promise<ReconsentTask[]> {
	const newest = versions.at(-1);
	if (!newest) return [];
	const asking = new Map<string, PublishedVersion>();
	for (const version of versions) {
		const number = askedAgainBy(versions, version.number, newest.number);
		const because = versions.find((each) => each.number === number);
		if (because) asking.set(version.id, because);
	}
	if (asking.size === 0) return [];
	const rows: Row[] = await reader
		.selectFrom('subject as s')
		.select([
			's.id',
			's.number',
			's.site_id',
			's.protocol_version_id',
			's.enrolled_on',
			's.characteristics'
		])
		.$if(subjectId !== null, (q) => q.where('s.id', '=', subjectId))
		.where('s.study_id', '=', studyId)
		.where('s.site_id', 'in', idsOf(sites))
		.where('s.protocol_version_id', 'in', [...asking.keys()])
		.where(active)
		.orderBy('s.number')
		.execute();
	return rows.flatMap((row) => {
		const because = asking.get(row.protocol_version_id);
		const site = sites.find((each) => each.id === row.site_id);
		if (!because || !site) return [];
		const due =
			because.reconsentBy ?? addDays(dateInZone(because.publishedAt, 'UTC'), reconsentWithinDays);
		return [
			{
				...whose(row, site),
				cause: 'amendment' as const,
				because: `Protocol version ${because.number}: ${because.summary ?? ''}`,
				...dueOn(due, site),
				refused: refusedOn(refused, row.id, newest.id)
			}
		];
	});
}

/** Whoever came in as a minor, has come of age and has not decided alone yet. */
async function byMajority(
	reader: Reader,
	studyId: string,
	sites: readonly SiteHead[],
	versions: readonly PublishedVersion[],
	refused: ReadonlyMap<string, string>,
	subjectId: string | null
): Promise<ReconsentTask[]> {
	const tasks: ReconsentTask[] = [];
	for (const version of versions) {
		const { minors, characteristics } = version.definition;
		const asked = characteristics.find((each) => each.kind === 'birth-date');
		if (!minors || !asked) continue;
		// Whoever has the year of majority behind them; the day itself is worked out below.
		const year =
			Number(dateInZone(clock.now(), 'Pacific/Kiritimati').slice(0, 4)) - minors.majority;
		const rows: Row[] = await reader
			.selectFrom('subject as s')
			.select([
				's.id',
				's.number',
				's.site_id',
				's.protocol_version_id',
				's.enrolled_on',
				's.characteristics'
			])
			.$if(subjectId !== null, (q) => q.where('s.id', '=', subjectId))
			.where('s.study_id', '=', studyId)
			.where('s.site_id', 'in', idsOf(sites))
			.where('s.protocol_version_id', '=', version.id)
			.where(sql<boolean>`left(s.characteristics ->> ${asked.key}, 4) <= ${String(year)}`)
			.where(active)
			.orderBy('s.number')
			.execute();
		for (const row of rows) {
			const site = sites.find((each) => each.id === row.site_id);
			const born = birthDateOf(version.definition, row.characteristics);
			if (!site || born === null) continue;
			const today = dateInZone(clock.now(), site.zone);
			const { day, leap, about } = majorityOf(born, minors.majority);
			if (day > today || day <= row.enrolled_on) continue;
			const consents = await consentsOf(reader, { subjectId: row.id }, site.zone);
			const decided = consents.some(
				(each) => each.signedBy === 'participant' && !each.withdrawnOn && each.signedOn >= day
			);
			if (decided) continue;
			const note = leap
				? ' Born on 29 February: the birthday is counted on 1 March in a year without one.'
				: about
					? ' The whole birth date is not known: this is the first day it may be.'
					: '';
			tasks.push({
				...whose(row, site),
				cause: 'majority',
				because: `Of age since ${shortDateText(day)}.${note}`,
				...dueOn(addDays(day, reconsentWithinDays), site),
				refused: refusedOn(refused, row.id, '')
			});
		}
	}
	return tasks;
}

const idsOf = (sites: readonly SiteHead[]) => sites.map((site) => site.id);
const whose = (row: Row, site: SiteHead) => ({
	subjectId: row.id,
	number: row.number,
	siteId: site.id,
	site: site.name
});
const dueOn = (due: PlainDate, site: SiteHead) => ({
	due: shortDateText(due),
	overdue: dateInZone(clock.now(), site.zone) > due
});
const refusedOn = (refused: ReadonlyMap<string, string>, subjectId: string, versionId: string) => {
	const on = refused.get(`${subjectId} ${versionId}`);
	return on === undefined ? null : shortDateText(plainDateOf(on));
};

async function tasksAt(
	reader: Reader,
	studyId: string,
	sites: readonly SiteHead[],
	subjectId: string | null = null
): Promise<ReconsentTask[]> {
	if (sites.length === 0) return [];
	const versions = await publishedVersions(reader, studyId);
	const refused = await refusals(reader, studyId);
	const tasks = [
		...(await byAmendment(reader, studyId, sites, versions, refused, subjectId)),
		...(await byMajority(reader, studyId, sites, versions, refused, subjectId))
	];
	const rank = (task: ReconsentTask) => (task.refused ? 2 : task.overdue ? 0 : 1);
	return tasks.sort((a, b) => rank(a) - rank(b) || (a.number < b.number ? -1 : 1));
}

/** Who must be asked again at the sites the actor may see; overdue first, those who refused last. */
export const findReconsents = (
	actor: Actor,
	studyId: string,
	query: { site?: string } = {}
): Promise<Reconsents> =>
	read(actor, 'screening.read', { studyId }, async (reader) => {
		const all = await sitesFor(reader, actor, studyId, 'screening.read');
		const sites = query.site ? all.filter((site) => site.id === query.site) : all;
		const mayLetFollow = may(actor.grants, 'study.publish', { studyId });
		return {
			tasks: await tasksAt(reader, studyId, sites),
			left: mayLetFollow
				? (await whoFollows(reader, studyId, await publishedVersions(reader, studyId))).length
				: 0,
			mayRecord: may(actor.grants, 'consent.record', { studyId }),
			mayLetFollow
		};
	});

/** Within a read: what one subject must be asked again about. */
export const tasksOf = (
	reader: Reader,
	studyId: string,
	site: SiteHead,
	subjectId: string
): Promise<ReconsentTask[]> => tasksAt(reader, studyId, [site], subjectId);
