import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader, type Writer } from '$lib/server/change';
import { may, type Capability } from '$lib/server/permission';
import { clock } from '$lib/time/clock';
import { findPlainDate, plainDateOf, type PlainDate } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import type { Closure } from '../schedule/booking';
import type { VisitWindow } from '../schedule/window';
import { studyDefinition, type OpeningHours, type StudyDefinition } from '../study/definition';
import type { VisitStatus } from './status';

export interface VisitSite {
	id: string;
	code: string;
	name: string;
	zone: string;
	opening: OpeningHours[];
	closures: Closure[];
}

/** One visit with what every rule about it needs. */
export interface VisitRow {
	id: string;
	studyId: string;
	subjectId: string;
	number: string;
	name: string;
	position: number;
	status: VisitStatus;
	version: number;
	happenedOn: PlainDate | null;
	finishedAt: Date | null;
	missedReason: string | null;
	/** Null while the day it is counted from is not known. */
	window: VisitWindow | null;
	/** The key in the schedule; null for a visit outside it. */
	key: string | null;
	protocolVersionId: string | null;
	lengthMinutes: number;
	site: VisitSite;
	/** Today where the visit takes place. */
	today: PlainDate;
}

export const usualLengthMinutes = 30;

export function windowOfRow(row: {
	earliest: string | null;
	target: string | null;
	latest: string | null;
}): VisitWindow | null {
	if (row.earliest === null || row.target === null || row.latest === null) return null;
	return {
		earliest: plainDateOf(row.earliest),
		target: plainDateOf(row.target),
		latest: plainDateOf(row.latest)
	};
}

/** The visit, or a refusal when the study has none of this id that the actor may see. */
export async function getVisit(
	reader: Reader,
	studyId: string,
	visitId: string
): Promise<VisitRow> {
	const row = await reader
		.selectFrom('visit as v')
		.innerJoin('subject as s', 's.id', 'v.subject_id')
		.innerJoin('site as p', 'p.id', 'v.site_id')
		.leftJoin('planned_visit as pv', 'pv.id', 'v.planned_visit_id')
		.select([
			'v.id',
			'v.study_id',
			'v.subject_id',
			's.number',
			'v.name',
			'v.position',
			'v.status',
			'v.version',
			'v.happened_on',
			'v.finished_at',
			'v.missed_reason',
			'v.earliest',
			'v.target',
			'v.latest',
			'pv.key',
			'pv.protocol_version_id',
			'pv.length_minutes',
			'p.id as site_id',
			'p.code as site_code',
			'p.name as site_name',
			'p.zone',
			'p.opening',
			'p.closures'
		])
		.where('v.study_id', '=', studyId)
		.where('v.id', '=', visitId)
		.executeTakeFirst();
	if (!row) throw new Refusal('NOT_FOUND');
	return {
		id: row.id,
		studyId: row.study_id,
		subjectId: row.subject_id,
		number: row.number,
		name: row.name,
		position: row.position,
		status: row.status,
		version: row.version,
		happenedOn: row.happened_on === null ? null : findPlainDate(row.happened_on),
		finishedAt: row.finished_at,
		missedReason: row.missed_reason,
		window: windowOfRow(row),
		key: row.key,
		protocolVersionId: row.protocol_version_id,
		lengthMinutes: row.length_minutes ?? usualLengthMinutes,
		site: {
			id: row.site_id,
			code: row.site_code,
			name: row.site_name,
			zone: row.zone,
			opening: row.opening as OpeningHours[],
			closures: row.closures as Closure[]
		},
		today: dateInZone(clock.now(), row.zone)
	};
}

/** The same inside a change: the row is held until the change is over, so that two people take turns. */
export async function holdVisit(
	writer: Writer,
	studyId: string,
	visitId: string
): Promise<VisitRow> {
	await writer
		.selectFrom('visit')
		.select('id')
		.where('study_id', '=', studyId)
		.where('id', '=', visitId)
		.forUpdate()
		.execute();
	return getVisit(writer, studyId, visitId);
}

/** Where the visit is, for the door: a change names the site it is about. */
export const scopeOfVisit = (
	actor: Actor,
	capability: Capability,
	studyId: string,
	visitId: string
): Promise<{ studyId: string; siteId: string }> =>
	read(actor, capability, { studyId }, async (reader) => {
		const row = await reader
			.selectFrom('visit as v')
			.innerJoin('subject as s', 's.id', 'v.subject_id')
			.select(['v.site_id', 's.site_id as present'])
			.where('v.study_id', '=', studyId)
			.where('v.id', '=', visitId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		// Whoever takes a subject over reads what the site before collected, and changes none of it.
		const reads =
			capability === 'subject.read' &&
			!may(actor.grants, capability, { studyId, siteId: row.site_id });
		return { studyId, siteId: reads ? row.present : row.site_id };
	});

/**
 * A published version never changes, so reading its definition once serves everybody who may see a visit that follows it;
 * checking it anew for each value entered took longer than keeping the value.
 */
const publishedDefinitions = new Map<string, StudyDefinition>();
const mostKept = 200;

/** The protocol version the visit was planned by, as it was published. */
export async function definitionOf(
	reader: Reader,
	protocolVersionId: string
): Promise<StudyDefinition> {
	const kept = publishedDefinitions.get(protocolVersionId);
	if (kept) return kept;
	const row = await reader
		.selectFrom('protocol_version')
		.select(['definition', 'status'])
		.where('id', '=', protocolVersionId)
		.executeTakeFirst();
	if (!row) throw new Refusal('NOT_FOUND');
	const definition = studyDefinition.parse(row.definition);
	if (row.status === 'published') {
		if (publishedDefinitions.size >= mostKept) publishedDefinitions.clear();
		publishedDefinitions.set(protocolVersionId, definition);
	}
	return definition;
}

const endings = [
	'stopped visits',
	'consent withdrawn',
	'lost to follow-up',
	'died',
	'completed'
] as const;

/** The day the subject's visits ended, if they have. Stopping the intervention alone does not end them. */
export async function visitsEndedOn(reader: Reader, subjectId: string): Promise<PlainDate | null> {
	const row = await reader
		.selectFrom('study_exit')
		.select('happened_on')
		.where('subject_id', '=', subjectId)
		.where('kind', 'in', endings)
		.where('taken_back_at', 'is', null)
		.orderBy('happened_on')
		.executeTakeFirst();
	return row ? findPlainDate(row.happened_on) : null;
}

/** Whether nothing more may be written down about the subject: consent withdrawn, or died. */
export async function collectionEnded(reader: Reader, subjectId: string): Promise<boolean> {
	const row = await reader
		.selectFrom('study_exit')
		.select('id')
		.where('subject_id', '=', subjectId)
		.where('kind', 'in', ['consent withdrawn', 'died'])
		.where('taken_back_at', 'is', null)
		.executeTakeFirst();
	return row !== undefined;
}

export async function refuseIfLeft(reader: Reader, subjectId: string): Promise<void> {
	if ((await visitsEndedOn(reader, subjectId)) !== null) throw new Refusal('LEFT_STUDY');
}

/**
 * Nothing is stored about a subject before a consent that has been signed, nor after it was withdrawn. Subjects taken
 * over from another system consented there.
 */
export async function refuseWithoutConsent(
	reader: Reader,
	subjectId: string,
	now: Date
): Promise<void> {
	const subject = await reader
		.selectFrom('subject')
		.select(['id', 'imported_as'])
		.where('id', '=', subjectId)
		.executeTakeFirst();
	if (!subject) throw new Refusal('NOT_FOUND');
	const withdrawn = await reader
		.selectFrom('study_exit')
		.select('id')
		.where('subject_id', '=', subjectId)
		.where('kind', '=', 'consent withdrawn')
		.where('taken_back_at', 'is', null)
		.executeTakeFirst();
	if (withdrawn) throw new Refusal('LEFT_STUDY');
	if (subject.imported_as !== null) return;
	const consent = await reader
		.selectFrom('consent')
		.select('id')
		.where('subject_id', '=', subjectId)
		.where('signed_at', '<=', now)
		.where('withdrawn_on', 'is', null)
		.executeTakeFirst();
	if (!consent) throw new Refusal('CONSENT_NEEDED');
}
