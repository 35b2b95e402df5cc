import type { Reader } from '$lib/server/change';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import { instantText } from '$lib/time/zones';
import { formKey } from '../amendment/amendment';
import { scanTypes, type ScanKind } from '../upload/scan';
import { assentWords, type Assent } from './consent';

export interface ScanView {
	id: string;
	kind: string;
	size: string;
	when: string;
	/** Why it was replaced; null for the one that stands. */
	superseded: string | null;
}

export interface ConsentView {
	id: string;
	label: string;
	language: string;
	form: string;
	signedAt: string;
	signed: Date;
	signedBy: string;
	explainedBy: string;
	/** Everything that was recorded, in sentences. */
	lines: string[];
	withdrawn: string | null;
	/** Null where they may not be seen. */
	scans: ScanView[] | null;
}

const languages: Record<string, string> = { en: 'English', de: 'German' };
export const languageName = (language: string): string => languages[language] ?? language;

const sizeText = (bytes: number) =>
	bytes < 1024 * 1024
		? `${Math.max(1, Math.round(bytes / 1024))} KB`
		: `${(bytes / 1024 / 1024).toFixed(1)} MB`;

async function scansOf(
	reader: Reader,
	consentIds: readonly string[],
	zone: string
): Promise<Map<string, ScanView[]>> {
	const byConsent = new Map<string, ScanView[]>();
	if (consentIds.length === 0) return byConsent;
	const rows = await reader
		.selectFrom('upload')
		.select([
			'id',
			'consent_id',
			'kind',
			'bytes',
			'uploaded_at',
			'superseded_at',
			'superseded_reason'
		])
		.where('consent_id', 'in', consentIds)
		.orderBy('uploaded_at', 'desc')
		.orderBy('id', 'desc')
		.execute();
	for (const row of rows)
		byConsent.set(row.consent_id, [
			...(byConsent.get(row.consent_id) ?? []),
			{
				id: row.id,
				kind: scanTypes[row.kind as ScanKind].name,
				size: sizeText(row.bytes),
				when: instantText(row.uploaded_at, zone),
				superseded: row.superseded_reason
			}
		]);
	return byConsent;
}

/** Within a read: the consents of a screening or a subject with all that was recorded, the oldest first. */
export async function consentViews(
	reader: Reader,
	of: { screeningId: string } | { subjectId: string },
	zone: string,
	mayScan: boolean
): Promise<ConsentView[]> {
	const rows = await reader
		.selectFrom('consent as c')
		.innerJoin('consent_version as v', 'v.id', 'c.consent_version_id')
		.innerJoin('person as p', 'p.id', 'c.explained_by')
		.select([
			'c.id',
			'v.label',
			'v.language',
			'c.signed_at',
			'c.obtained_at',
			'c.signed_by',
			'c.relationship',
			'c.witnessed',
			'c.minor',
			'c.assent',
			'c.assent_reason',
			'c.withdrawn_on',
			'c.withdrawn_reason',
			'p.name'
		])
		.$if('screeningId' in of, (q) =>
			q.where('c.screening_id', '=', (of as { screeningId: string }).screeningId)
		)
		.$if('subjectId' in of, (q) =>
			q.where('c.subject_id', '=', (of as { subjectId: string }).subjectId)
		)
		.orderBy('c.signed_at')
		.execute();
	const scans = mayScan
		? await scansOf(
				reader,
				rows.map((row) => row.id),
				zone
			)
		: null;
	return rows.map((row) => ({
		id: row.id,
		label: row.label,
		language: row.language,
		form: formKey(row),
		signedAt: instantText(row.signed_at, zone),
		signed: row.signed_at,
		signedBy: row.signed_by,
		explainedBy: row.name,
		lines: [
			row.signed_by === 'participant'
				? 'Signed by the participant.'
				: `Signed by the legally acceptable representative${row.relationship ? ` (${row.relationship})` : ''}.`,
			`Explained by ${row.name}${row.obtained_at ? `, who signed on ${instantText(row.obtained_at, zone)}` : ''}.`,
			`In ${languageName(row.language)}; a copy was given.`,
			row.minor && row.assent
				? `A minor: ${assentWords[row.assent as Assent]}${row.assent_reason ? ` (${row.assent_reason})` : ''}.`
				: '',
			row.witnessed ? 'An impartial witness signed as well.' : ''
		].filter(Boolean),
		withdrawn:
			row.withdrawn_on === null
				? null
				: `Withdrawn on ${shortDateText(plainDateOf(row.withdrawn_on))}.${row.withdrawn_reason ? ` ${row.withdrawn_reason}` : ''}`,
		scans: scans && (scans.get(row.id) ?? [])
	}));
}

export interface ConsentChoices {
	consentVersions: {
		id: string;
		label: string;
		language: string;
		form: string;
		approvedOn: string;
	}[];
	/** Who may have explained the study: people with a role at the site. */
	explainers: { id: string; name: string }[];
}

/** Within a read: what a consent form offers to choose from. */
export async function consentChoices(
	reader: Reader,
	studyId: string,
	site: { id: string; today: string }
): Promise<ConsentChoices> {
	const versions = await reader
		.selectFrom('consent_version')
		.select(['id', 'label', 'language', 'approved_on as approvedOn'])
		.where('study_id', '=', studyId)
		.orderBy('approved_on', 'desc')
		.orderBy('label', 'desc')
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
					.where((f) => f.or([f('r.site_id', 'is', null), f('r.site_id', '=', site.id)]))
					.where('r.valid_from', '<=', site.today)
					.where((f) => f.or([f('r.valid_to', 'is', null), f('r.valid_to', '>=', site.today)]))
			)
		)
		.where('p.active', '=', true)
		.orderBy('p.name')
		.execute();
	return {
		consentVersions: versions.map((row) => ({
			id: row.id,
			label: row.label,
			form: formKey(row),
			approvedOn: row.approvedOn,
			language: row.language
		})),
		explainers
	};
}
