import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import { dateInZone, instantText, timeInZone } from '$lib/time/zones';
import { armName, isRandomised, type StudyDefinition } from '../study/definition';
import { unmaskingsOf } from '../unmasking/unmasking.reads.server';
import { consentViews, type ConsentView } from '../consent/consent.reads.server';
import { tasksOf, type ReconsentTask } from '../consent/reconsent.reads.server';
import { inWindow, windowText } from '../schedule/window';
import { getDefinition } from '../study/study.reads.server';
import { windowOfRow } from '../visit/visit.reads.server';
import type { ExitKind } from './exit';
import { exitItems, movedItems, refusedItems } from './record-ways.server';
import { measurementsOf, type MeasurementLine } from './record-values.server';
import { getSite, siteOf, type SiteNow } from './site.reads.server';
import type { ThreadRow } from './thread';
import { threadOf } from './threads.reads.server';

/** One thing that happened to a subject, as the Thread page tells it. */
export interface RecordItem {
	id: string;
	kind:
		| 'screening'
		| 'consent'
		| 'enrolment'
		| 'randomisation'
		| 'visit'
		| 'contact'
		| 'deviation'
		| 'exit'
		| 'unmasking'
		| 'refusal'
		| 'transfer'
		| 'mail';
	/** In words, with the zone where it is an instant. */
	when: string;
	/** For sorting: the site's own day and time. */
	key: string;
	title: string;
	lines: string[];
	visitId?: string;
	measurements?: MeasurementLine[];
}

export interface VisitAhead {
	id: string;
	name: string;
	window: string;
	earliest: string | null;
	target: string | null;
	latest: string | null;
	status: ThreadRow['visits'][number]['status'];
	booked: string | null;
	bookedOn: string | null;
	bookedAt: Date | null;
	/** Booked on a day that an amendment took out of its window, and not because somebody said why. */
	toMove: boolean;
}

export interface ContactDetails {
	name: string;
	email: string | null;
	phone: string | null;
	language: string;
	version: number;
}

export interface SubjectRecord {
	subject: {
		id: string;
		number: string;
		importedAs: string | null;
		version: number;
		enrolledOn: string;
		kitNumber: string | null;
		/** Where the study masks nothing. */
		arm: string | null;
		facts: { name: string; value: string }[];
	};
	site: SiteNow;
	thread: ThreadRow;
	items: RecordItem[];
	ahead: VisitAhead[];
	exits: ExitKind[];
	/** Ways out that stand, to be taken back where they were a mistake. */
	standing: { id: string; kind: ExitKind; on: string }[];
	randomised: boolean;
	/** Whether there is an allocation that is kept from the site. */
	masked: boolean;
	maskedStudy: boolean;
	/** The stratification factors with the level on record, for whoever may correct it. */
	strata: {
		key: string;
		name: string;
		level: string;
		levels: { value: string; label: string }[];
	}[];
	/** The protocol version the subject follows, and what it must be asked again about. */
	version: { number: number; since: string | null; newest: number };
	tasks: ReconsentTask[];
	consents: ConsentView[];
	/** A site the subject has left sees what was collected there; where it went, and when. */
	away: { to: string; on: string } | null;
	underWay: number;
	lostAfterAttempts: number;
	/** Null without the permission to read them; the permission of their own is asked in a read of its own. */
	contact: ContactDetails | 'none' | null;
	may: {
		randomise: boolean;
		exit: boolean;
		editContact: boolean;
		correct: boolean;
		unmask: boolean;
		consent: boolean;
		scan: boolean;
		transfer: boolean;
	};
}

/** The whole record of one subject in the order of time. */
export async function getSubjectRecord(
	actor: Actor,
	studyId: string,
	subjectId: string
): Promise<SubjectRecord> {
	const siteId = await siteOf(actor, 'subject.read', 'subject', studyId, subjectId);
	const scope = { studyId, siteId };
	const seenFrom = may(actor.grants, 'subject.read', scope)
		? siteId
		: ((await formerSite(actor, studyId, subjectId)) ?? siteId);
	const mayScan = may(actor.grants, 'consent.scan', scope);
	const record = await read(
		actor,
		'subject.read',
		{ studyId, siteId: seenFrom },
		async (reader) => {
			const row = await reader
				.selectFrom('subject')
				.select([
					'id',
					'number',
					'imported_as',
					'version',
					'enrolled_on',
					'kit_number',
					'arm_key',
					'randomised_at',
					'protocol_version_id',
					'version_since',
					'stratum',
					'characteristics'
				])
				.where('study_id', '=', studyId)
				.where('id', '=', subjectId)
				.executeTakeFirst();
			if (!row) throw new Refusal('NOT_FOUND');
			const site = await getSite(reader, studyId, siteId);
			const definition = await getDefinition(reader, studyId, row.protocol_version_id);
			const study = await reader
				.selectFrom('study')
				.select('masked')
				.where('id', '=', studyId)
				.executeTakeFirstOrThrow();
			const visits = await visitsOf(reader, studyId, subjectId, site);
			const consents = await consentViews(reader, { subjectId }, site.zone, mayScan);
			const versions = await reader
				.selectFrom('protocol_version')
				.select(['id', 'number'])
				.where('study_id', '=', studyId)
				.where('status', '=', 'published')
				.orderBy('number')
				.execute();
			const items = [
				...(await wayIn(
					reader,
					subjectId,
					site,
					{ ...row, arm: armName(definition, row.arm_key) },
					consents
				)),
				...visits.items,
				...(await alongTheWay(reader, studyId, subjectId, site))
			].sort((a, b) => (a.key < b.key ? -1 : a.key > b.key ? 1 : 0));
			const exits = await reader
				.selectFrom('study_exit')
				.select(['id', 'kind', 'happened_on'])
				.where('study_id', '=', studyId)
				.where('subject_id', '=', subjectId)
				.where('taken_back_at', 'is', null)
				.orderBy('happened_on')
				.execute();
			return {
				subject: {
					id: row.id,
					number: row.number,
					importedAs: row.imported_as,
					version: row.version,
					enrolledOn: shortDateText(plainDateOf(row.enrolled_on)),
					kitNumber: row.kit_number,
					arm: armName(definition, row.arm_key),
					facts: factsOf(definition, row.characteristics, row.stratum)
				},
				site,
				thread: await threadOf(reader, studyId, subjectId),
				items,
				ahead: visits.ahead,
				exits: exits.map((exit) => exit.kind as ExitKind),
				masked: row.kit_number !== null && study.masked,
				maskedStudy: study.masked,
				strata: strataOf(definition, row.stratum),
				standing: exits.map((exit) => ({
					id: exit.id,
					kind: exit.kind as ExitKind,
					on: dayWords(exit.happened_on)
				})),
				version: {
					number: versions.find((each) => each.id === row.protocol_version_id)?.number ?? 1,
					since: row.version_since === null ? null : dayWords(row.version_since),
					newest: versions.at(-1)?.number ?? 1
				},
				tasks: await tasksOf(reader, studyId, site, subjectId),
				consents,
				away: seenFrom === siteId ? null : await whereTo(reader, subjectId, site),
				underWay: visits.underWay,
				lostAfterAttempts: definition.lostAfterAttempts ?? 1,
				randomised: isRandomised(definition)
			};
		}
	);
	return {
		...record,
		contact: may(actor.grants, 'contact.read', scope)
			? await getContact(actor, studyId, siteId, subjectId)
			: null,
		may: {
			randomise: may(actor.grants, 'subject.randomise', scope),
			exit: may(actor.grants, 'subject.exit', scope),
			editContact: may(actor.grants, 'contact.edit', scope),
			correct: may(actor.grants, 'subject.correct', scope),
			unmask: may(actor.grants, 'unmasking.record', scope),
			consent: may(actor.grants, 'consent.record', scope),
			scan: mayScan,
			transfer: may(actor.grants, 'subject.transfer', scope)
		}
	};
}

const strataOf = (definition: StudyDefinition, stratum: unknown): SubjectRecord['strata'] =>
	definition.strata.map(({ key, name, levels }) => ({
		key,
		name,
		level: String((stratum as Record<string, unknown> | null)?.[key] ?? ''),
		levels: levels.map((each) => ({ value: each.key, label: each.name }))
	}));
/** A site of the actor's that the subject was at before. */
const formerSite = (actor: Actor, studyId: string, subjectId: string) =>
	read(actor, 'subject.read', { studyId }, async (reader) => {
		const rows = await reader
			.selectFrom('transfer')
			.select('from_site_id')
			.where('study_id', '=', studyId)
			.where('subject_id', '=', subjectId)
			.execute();
		return (
			rows.find((row) => may(actor.grants, 'subject.read', { studyId, siteId: row.from_site_id }))
				?.from_site_id ?? null
		);
	});

async function whereTo(reader: Reader, subjectId: string, site: SiteNow) {
	const last = await reader
		.selectFrom('transfer')
		.select('transferred_on')
		.where('subject_id', '=', subjectId)
		.orderBy('made_at', 'desc')
		.executeTakeFirst();
	return { to: site.name, on: last ? dayWords(last.transferred_on) : '' };
}

const getContact = (actor: Actor, studyId: string, siteId: string, subjectId: string) =>
	read(actor, 'contact.read', { studyId, siteId }, async (reader) => {
		const found = await reader
			.selectFrom('contact_details')
			.select(['name', 'email', 'phone', 'language', 'version'])
			.where('study_id', '=', studyId)
			.where('subject_id', '=', subjectId)
			.executeTakeFirst();
		return found ?? ('none' as const);
	});

function factsOf(definition: StudyDefinition, characteristics: unknown, stratum: unknown) {
	const known = (characteristics ?? {}) as Record<string, string | number>;
	const levels = (stratum ?? {}) as Record<string, string>;
	const facts = definition.characteristics.flatMap((each) => {
		const value = known[each.key];
		if (value === undefined) return [];
		const said =
			each.kind === 'choice'
				? (each.choices.find((choice) => choice.key === value)?.name ?? String(value))
				: String(value);
		return [{ name: each.name, value: said }];
	});
	// A characteristic that an import brought and no definition names is shown by its own name.
	for (const [key, value] of Object.entries(known))
		if (!definition.characteristics.some((each) => each.key === key))
			facts.push({ name: key, value: String(value) });
	for (const factor of definition.strata) {
		const level = factor.levels.find((each) => each.key === levels[factor.key]);
		if (level) facts.push({ name: factor.name, value: level.name });
	}
	return facts;
}

const dayKey = (date: string, rank = '') => `${date}${rank ? ` ${rank}` : ''}`;
const instantKey = (at: Date, zone: string) => `${dateInZone(at, zone)} ${timeInZone(at, zone)}`;
const dayWords = (date: string) => shortDateText(plainDateOf(date));

async function wayIn(
	reader: Reader,
	subjectId: string,
	site: SiteNow,
	subject: {
		id: string;
		enrolled_on: string;
		randomised_at: Date | null;
		kit_number: string | null;
		imported_as: string | null;
		arm: string | null;
	},
	consents: readonly ConsentView[]
): Promise<RecordItem[]> {
	const screenings = await reader
		.selectFrom('screening')
		.select(['id', 'number', 'screened_on'])
		.where('subject_id', '=', subjectId)
		.execute();
	const items: RecordItem[] = screenings.map((each) => ({
		id: each.id,
		kind: 'screening',
		when: dayWords(each.screened_on),
		key: dayKey(each.screened_on),
		title: 'Screened',
		lines: [`Number ${each.number} of the site’s screening log.`]
	}));
	for (const each of consents)
		items.push({
			id: each.id,
			kind: 'consent',
			when: each.signedAt,
			key: instantKey(each.signed, site.zone),
			title: `Consent, version ${each.label}`,
			lines: [...each.lines, each.withdrawn ?? ''].filter(Boolean)
		});
	items.push({
		id: subject.id,
		kind: 'enrolment',
		when: dayWords(subject.enrolled_on),
		// After a consent of the same day, before the first visit.
		key: dayKey(subject.enrolled_on, '~1'),
		title: 'Enrolled',
		lines: subject.imported_as
			? [`Taken over from a file, where the subject is “${subject.imported_as}”.`]
			: []
	});
	if (subject.randomised_at)
		items.push({
			id: `${subject.id}-randomised`,
			kind: 'randomisation',
			when: instantText(subject.randomised_at, site.zone),
			key: dayKey(dateInZone(subject.randomised_at, site.zone), '~2'),
			title: 'Randomised',
			lines: [
				subject.arm === null
					? `Kit ${subject.kit_number ?? ''}.`
					: `${subject.arm}, kit ${subject.kit_number ?? ''}.`
			]
		});
	return items;
}

async function visitsOf(
	reader: Reader,
	studyId: string,
	subjectId: string,
	site: SiteNow
): Promise<{ items: RecordItem[]; ahead: VisitAhead[]; underWay: number }> {
	const visits = await reader
		.selectFrom('visit as v')
		.leftJoin('appointment as a', (join) =>
			join.onRef('a.visit_id', '=', 'v.id').on('a.status', '=', 'booked')
		)
		.leftJoin('room as r', 'r.id', 'a.room_id')
		.leftJoin('person as f', 'f.id', 'v.finished_by')
		.select([
			'v.id',
			'v.name',
			'v.position',
			'v.status',
			'v.earliest',
			'v.target',
			'v.latest',
			'v.happened_on',
			'v.study_time',
			'v.missed_reason',
			'v.finished_at',
			'f.name as finished_by',
			'a.starts_at',
			'a.outside_reason',
			'r.name as room'
		])
		.where('v.study_id', '=', studyId)
		.where('v.subject_id', '=', subjectId)
		.orderBy('v.position')
		.execute();
	const values = await measurementsOf(reader, studyId, subjectId);
	const items: RecordItem[] = [];
	const ahead: VisitAhead[] = [];
	for (const visit of visits) {
		const window = windowOfRow(visit);
		const windowWords = window
			? `Window ${windowText(window)}, target ${shortDateText(window.target)}.`
			: '';
		if (visit.status === 'planned' || visit.status === 'booked') {
			ahead.push({
				id: visit.id,
				name: visit.name,
				window: window ? windowText(window) : 'not known yet',
				earliest: visit.earliest,
				target: visit.target,
				latest: visit.latest,
				status: visit.status,
				booked: visit.starts_at
					? `${instantText(visit.starts_at, site.zone)}${visit.room ? `, ${visit.room}` : ''}`
					: null,
				bookedOn: visit.starts_at ? dateInZone(visit.starts_at, site.zone) : null,
				bookedAt: visit.starts_at,
				toMove:
					visit.starts_at !== null &&
					window !== null &&
					visit.outside_reason === null &&
					!inWindow(window, dateInZone(visit.starts_at, site.zone))
			});
			continue;
		}
		const day = visit.happened_on ?? visit.latest;
		items.push({
			id: visit.id,
			kind: 'visit',
			when: visit.happened_on
				? dayWords(visit.happened_on)
				: visit.study_time !== null
					? `study time ${visit.study_time}`
					: window
						? windowText(window)
						: '',
			// Visits without a date stand after the enrolment, by their order.
			key: day ? dayKey(day, '~3') : dayKey('9999', String(visit.position).padStart(4, '0')),
			title: `${visit.name}: ${visit.status}`,
			lines: [
				windowWords,
				visit.missed_reason ? `Reason: ${visit.missed_reason}` : '',
				visit.finished_at && visit.finished_by
					? `Finished ${instantText(visit.finished_at, site.zone)} by ${visit.finished_by}.`
					: ''
			].filter(Boolean),
			visitId: visit.id,
			measurements: values.get(visit.id) ?? []
		});
	}
	const underWay = visits.filter((visit) => visit.status === 'under way').length;
	return { items, ahead, underWay };
}

const mailWords: Record<string, string> = {
	'visit-invitation': 'Invitation to a visit',
	'visit-moved': 'A visit was moved',
	'visit-cancelled': 'A visit was cancelled'
};

/** Written when it was caused; the line says when it left, where that was another day. */
function mailState(status: string, caused: Date, sent: Date | null, zone: string): string {
	if (status !== 'sent' || !sent) return `E-mail: ${status}.`;
	return dateInZone(sent, zone) === dateInZone(caused, zone)
		? 'Sent by e-mail.'
		: `Sent by e-mail on ${dayWords(dateInZone(sent, zone))}.`;
}

async function alongTheWay(
	reader: Reader,
	studyId: string,
	subjectId: string,
	site: SiteNow
): Promise<RecordItem[]> {
	const contacts = await reader
		.selectFrom('contact_attempt as c')
		.innerJoin('person as p', 'p.id', 'c.by')
		.leftJoin('visit as v', 'v.id', 'c.visit_id')
		.select([
			'c.id',
			'c.at',
			'c.way',
			'c.outcome',
			'c.next_step',
			'c.try_again_on',
			'p.name as by',
			'v.name as visit'
		])
		.where('c.study_id', '=', studyId)
		.where('c.subject_id', '=', subjectId)
		.execute();
	const deviations = await reader
		.selectFrom('deviation')
		.select(['id', 'category', 'detail', 'important', 'found_at'])
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.execute();
	const mails = await reader
		.selectFrom('mail')
		.select(['id', 'kind', 'status', 'created_at', 'sent_at'])
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.execute();
	const items: RecordItem[] = [];
	for (const each of await unmaskingsOf(reader, studyId, subjectId))
		items.push({
			id: each.id,
			kind: 'unmasking',
			when: each.recorded,
			key: instantKey(each.recordedAt, site.zone),
			title: `Unmasked: ${each.kind.toLowerCase()}`,
			lines: [
				each.happened === each.recorded ? '' : `It happened at ${each.happened}.`,
				`Known to ${each.knownTo}. Recorded by ${each.by}.`,
				`Reason: ${each.reason}`,
				each.impact ? `What it may have touched: ${each.impact}` : '',
				'The arm is not part of this record.'
			].filter(Boolean)
		});
	for (const each of contacts)
		items.push({
			id: each.id,
			kind: 'contact',
			when: instantText(each.at, site.zone),
			key: instantKey(each.at, site.zone),
			title: `Contact by ${each.way}: ${each.outcome}`,
			lines: [
				each.visit ? `About ${each.visit}.` : '',
				each.next_step ? `Next step: ${each.next_step}` : '',
				each.try_again_on ? `Try again on ${dayWords(each.try_again_on)}.` : '',
				`By ${each.by}.`
			].filter(Boolean)
		});
	for (const each of deviations)
		items.push({
			id: each.id,
			kind: 'deviation',
			when: instantText(each.found_at, site.zone),
			key: instantKey(each.found_at, site.zone),
			title: `Deviation: ${each.category}${each.important ? ', important' : ''}`,
			lines: [each.detail]
		});
	items.push(
		...(await exitItems(reader, studyId, subjectId, site)),
		...(await movedItems(reader, studyId, subjectId)),
		...(await refusedItems(reader, studyId, subjectId))
	);
	for (const each of mails)
		items.push({
			id: each.id,
			kind: 'mail',
			when: instantText(each.created_at, site.zone),
			key: instantKey(each.created_at, site.zone),
			title: mailWords[each.kind] ?? each.kind,
			lines: [mailState(each.status, each.created_at, each.sent_at, site.zone)]
		});
	return items;
}
