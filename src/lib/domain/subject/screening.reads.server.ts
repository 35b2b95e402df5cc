import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { may, sitesAllowing } from '$lib/server/permission';
import { instantText } from '$lib/time/zones';
import type { SignatureView } from '../signature/signature.input';
import { signaturesOf } from '../signature/signature.reads.server';
import { isRandomised, type StudyDefinition } from '../study/definition';
import { getPublished } from '../study/study.reads.server';
import { answersOf, type Answers } from './eligibility';
import { eligibilityKind } from './eligibility-signable.server';
import { getSite, siteOf, type SiteNow } from './site.reads.server';
import type { ScreeningsQuery } from './subject.input';

export interface ScreeningRow {
	id: string;
	number: number;
	site: { code: string; name: string };
	screenedOn: string;
	outcome: 'in progress' | 'entered' | 'not entered';
	reason: string | null;
	consents: number;
	subject: { id: string; number: string } | null;
	version: number;
}

export interface ScreeningPage {
	items: ScreeningRow[];
	nextCursor: string | null;
}

/** The screening log, the newest first. */
export const findScreenings = (
	actor: Actor,
	studyId: string,
	query: ScreeningsQuery
): Promise<ScreeningPage> =>
	read(actor, 'screening.read', { studyId }, async (reader) => {
		const sites = sitesAllowing(actor.grants, 'screening.read', studyId);
		const rows = await reader
			.selectFrom('screening as c')
			.innerJoin('site as p', 'p.id', 'c.site_id')
			.leftJoin('subject as s', 's.id', 'c.subject_id')
			.select((e) => [
				'c.id',
				'c.number',
				'c.screened_on',
				'c.outcome',
				'c.reason',
				'c.version',
				'p.code',
				'p.name',
				's.id as subject_id',
				's.number as subject_number',
				e
					.selectFrom('consent')
					.whereRef('consent.screening_id', '=', 'c.id')
					.select((f) => f.fn.countAll<string>().as('n'))
					.as('consents')
			])
			.where('c.study_id', '=', studyId)
			.$if(sites !== null, (q) => q.where('c.site_id', 'in', sites ?? []))
			.$if(Boolean(query.site), (q) => q.where('c.site_id', '=', query.site as string))
			.$if(Boolean(query.cursor), (q) => q.where('c.id', '<', query.cursor as string))
			.orderBy('c.id', 'desc')
			.limit(query.limit + 1)
			.execute();
		const items = rows.slice(0, query.limit).map((row) => ({
			id: row.id,
			number: row.number,
			site: { code: row.code, name: row.name },
			screenedOn: row.screened_on,
			outcome: row.outcome,
			reason: row.reason,
			consents: Number(row.consents),
			subject:
				row.subject_id && row.subject_number
					? { id: row.subject_id, number: row.subject_number }
					: null,
			version: row.version
		}));
		return { items, nextCursor: rows.length > query.limit ? (items.at(-1)?.id ?? null) : null };
	});

export interface ScreeningDetail {
	id: string;
	number: number;
	version: number;
	site: SiteNow;
	screenedOn: string;
	outcome: 'in progress' | 'entered' | 'not entered';
	reason: string | null;
	answers: Answers;
	consents: {
		id: string;
		label: string;
		signedAt: string;
		signedBy: string;
		explainedBy: string;
	}[];
	subject: { id: string; number: string } | null;
	/** What the version in force asks for. */
	definition: Pick<
		StudyDefinition,
		'eligibility' | 'strata' | 'stratifyBySite' | 'characteristics' | 'sites'
	>;
	randomised: boolean;
	/** The investigator's signatures of the checklist, the newest first. */
	signatures: SignatureView[];
	/** Whether the protocol asks for one before enrolment, and whether the actor can sign now. */
	signing: { asked: boolean; obstacle: string | null; mine: boolean };
	consentVersions: { id: string; label: string; approvedOn: string }[];
	/** Who may have explained the study: people with a role at the site. */
	explainers: { id: string; name: string }[];
	mayEdit: boolean;
	mayContact: boolean;
}

export async function getScreening(
	actor: Actor,
	studyId: string,
	screeningId: string
): Promise<ScreeningDetail> {
	const siteId = await siteOf(actor, 'screening.read', 'screening', studyId, screeningId);
	return read(actor, 'screening.read', { studyId, siteId }, async (reader) => {
		const row = await reader
			.selectFrom('screening as c')
			.leftJoin('subject as s', 's.id', 'c.subject_id')
			.select([
				'c.id',
				'c.number',
				'c.version',
				'c.screened_on',
				'c.outcome',
				'c.reason',
				'c.eligibility',
				's.id as subject_id',
				's.number as subject_number'
			])
			.where('c.study_id', '=', studyId)
			.where('c.id', '=', screeningId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		const site = await getSite(reader, studyId, siteId);
		const { definition } = await getPublished(reader, studyId);
		const consents = await reader
			.selectFrom('consent as c')
			.innerJoin('consent_version as v', 'v.id', 'c.consent_version_id')
			.innerJoin('person as p', 'p.id', 'c.explained_by')
			.select(['c.id', 'v.label', 'c.signed_at', 'c.signed_by', 'p.name'])
			.where('c.screening_id', '=', screeningId)
			.orderBy('c.signed_at')
			.execute();
		const consentVersions = await reader
			.selectFrom('consent_version')
			.select(['id', 'label', 'approved_on as approvedOn'])
			.where('study_id', '=', studyId)
			.orderBy('approved_on', 'desc')
			.execute();
		const explainers = await reader
			.selectFrom('person as p')
			.select(['p.id', 'p.name'])
			.where((e) =>
				e.exists(
					e
						.selectFrom('person_role as r')
						.select('r.id')
						.whereRef('r.person_id', '=', 'p.id')
						.where('r.study_id', '=', studyId)
						.where('r.role', 'in', ['coordinator', 'investigator', 'nurse'])
						.where((f) => f.or([f('r.site_id', 'is', null), f('r.site_id', '=', siteId)]))
						.where('r.valid_from', '<=', site.today)
						.where((f) => f.or([f('r.valid_to', 'is', null), f('r.valid_to', '>=', site.today)]))
				)
			)
			.where('p.active', '=', true)
			.orderBy('p.name')
			.execute();
		const [signable] = await eligibilityKind.find(reader, [screeningId]);
		return {
			id: row.id,
			number: row.number,
			version: row.version,
			site,
			screenedOn: row.screened_on,
			outcome: row.outcome,
			reason: row.reason,
			answers: answersOf(row.eligibility),
			consents: consents.map((each) => ({
				id: each.id,
				label: each.label,
				signedAt: instantText(each.signed_at, site.zone),
				signedBy: each.signed_by,
				explainedBy: each.name
			})),
			subject:
				row.subject_id && row.subject_number
					? { id: row.subject_id, number: row.subject_number }
					: null,
			definition: {
				eligibility: definition.eligibility,
				strata: definition.strata,
				stratifyBySite: definition.stratifyBySite,
				characteristics: definition.characteristics,
				sites: definition.sites
			},
			randomised: isRandomised(definition),
			signatures: await signaturesOf(reader, 'eligibility', screeningId),
			signing: {
				asked: definition.eligibilitySigned ?? false,
				obstacle: signable?.obstacle ?? null,
				mine: may(actor.grants, eligibilityKind.capability, { studyId, siteId })
			},
			consentVersions,
			explainers,
			mayEdit: may(actor.grants, 'screening.edit', { studyId, siteId }),
			mayContact: may(actor.grants, 'contact.edit', { studyId, siteId })
		};
	});
}

/** The sites where the actor may screen, with the day it is there. */
export const findScreeningSites = (actor: Actor, studyId: string): Promise<SiteNow[]> =>
	read(actor, 'screening.read', { studyId }, async (reader) => {
		const allowed = sitesAllowing(actor.grants, 'screening.edit', studyId);
		if (allowed?.length === 0) return [];
		const sites = await reader
			.selectFrom('site')
			.select('id')
			.where('study_id', '=', studyId)
			.$if(allowed !== null, (q) => q.where('id', 'in', allowed ?? []))
			.orderBy('code')
			.execute();
		const found: SiteNow[] = [];
		for (const site of sites) found.push(await getSite(reader, studyId, site.id));
		return found;
	});
