import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { may, sitesAllowing } from '$lib/server/permission';
import { formsInForce } from '../amendment/amendment';
import { newestOf, publishedVersions } from '../amendment/versions.reads.server';
import { whyNot } from '../consent/consent';
import {
	consentChoices,
	consentViews,
	type ConsentChoices,
	type ConsentView
} from '../consent/consent.reads.server';
import { consentsOf, groundFor } from '../consent/ground.server';
import type { SignatureView } from '../signature/signature.input';
import { signaturesOf } from '../signature/signature.reads.server';
import { isRandomised, type StudyDefinition } from '../study/definition';
import { answeredVersionOf, answersOf, type Answers } from './eligibility';
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
	consents: (ConsentView & { counts: boolean })[];
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
	choices: ConsentChoices;
	/** Forms of the version in force, by label and language. */
	forms: string[];
	minors: StudyDefinition['minors'] | null;
	mayConsent: boolean;
	mayScan: boolean;
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
		const versions = await publishedVersions(reader, studyId);
		const newest = newestOf(versions);
		const answered = answeredVersionOf(row.eligibility);
		// What is closed is shown by the version it was answered by.
		const { definition } =
			(row.outcome === 'in progress'
				? undefined
				: versions.find((version) => version.number === answered)) ?? newest;
		const mayScan = may(actor.grants, 'consent.scan', { studyId, siteId });
		const consents = await consentViews(reader, { screeningId }, site.zone, mayScan);
		const forms = formsInForce(versions, newest.number);
		const known = await consentsOf(reader, { screeningId }, site.zone);
		const ground = groundFor(versions, newest.number, site.today, null);
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
			consents: consents.map((each) => {
				const consent = known.find((one) => one.id === each.id);
				return {
					...each,
					counts:
						row.outcome !== 'in progress' || (consent ? whyNot(consent, ground) === null : false)
				};
			}),
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
			choices: await consentChoices(reader, studyId, site),
			forms: [...forms],
			minors: definition.minors ?? null,
			mayConsent: may(actor.grants, 'consent.record', { studyId, siteId }),
			mayScan,
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
