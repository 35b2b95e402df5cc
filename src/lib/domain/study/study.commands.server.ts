import { sql } from 'kysely';
import { byOrder } from '$lib/domain/schedule/window';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import { plainDateOf } from '$lib/time/dates';
import { clock } from '$lib/time/clock';
import {
	amendmentColumns,
	holdVersion,
	keepZones,
	letFollow
} from '../amendment/amendment.commands.server';
import { publishAmendmentInput, type PublishAmendmentInput } from '../amendment/amendment.input';
import { checkDefinition } from './check';
import { readStudyFile } from './definition-file';
import { emptyDefinition } from './empty';
import {
	decimalsOfMeasure,
	isRandomised,
	openTo,
	unitOfMeasure,
	type SiteDefinition,
	type StudyDefinition
} from './definition';
import { settleStudy } from './settle.server';
import type { CreateBlankInput, CreateStudyInput } from './study.input';
import { readDefinition } from './template';
import { findTemplate } from './templates.server';

/** The template as the input changes it. Codes of sites follow their order: 01, 02, … */
export function definitionFrom(
	template: StudyDefinition,
	input: CreateStudyInput
): StudyDefinition {
	const [first] = template.sites;
	const sites = input.sites.map((site, at): SiteDefinition => {
		const like = template.sites[at] ?? first;
		return {
			code: String(at + 1).padStart(2, '0'),
			name: site.name,
			zone: site.zone,
			openingHours: like?.openingHours ?? [],
			rooms:
				site.rooms?.map((name, room) => ({ key: `room-${room + 1}`, name })) ?? like?.rooms ?? []
		};
	});
	return {
		...template,
		code: input.code,
		name: input.name,
		masked: input.masked && isRandomised(template),
		sites,
		...(input.plannedSubjects ? { plannedSubjects: input.plannedSubjects } : {}),
		consentVersions: template.consentVersions.map((version) => ({
			...version,
			from: input.consentApprovedOn ? plainDateOf(input.consentApprovedOn) : version.from
		}))
	};
}

/** A new study from one of the templates: the study, its draft, sites, rooms and consent versions. */
export async function createStudy(
	actor: Actor,
	input: CreateStudyInput
): Promise<{ studyId: string }> {
	const template = findTemplate(input.template);
	if (!template) throw new Refusal('INVALID', {}, { template: 'Choose a template of the list.' });
	return createStudyFrom(actor, definitionFrom(template.definition, input), {
		training: input.training
	});
}

/** A new study from nothing: a draft with one visit and one measure, to be set up by hand. */
export const createBlankStudy = (
	actor: Actor,
	{ code, name, training }: CreateBlankInput
): Promise<{ studyId: string }> =>
	createStudyFrom(actor, emptyDefinition(code, name), { training });

const mostNamed = 5;

/** A new study from a file with a definition: taken whole, as a draft, or refused with what is wrong and where. */
export async function createStudyFromFile(
	actor: Actor,
	bytes: Uint8Array,
	{ code, training }: { code?: string | undefined; training: boolean }
): Promise<{ studyId: string }> {
	const read = readStudyFile(bytes);
	if (!read.ok) {
		const named = read.problems
			.slice(0, mostNamed)
			.map(({ path, problem }) => (path === '' ? problem.message : `${path}: ${problem.message}`));
		const more = read.problems.length - named.length;
		throw new Refusal(
			'DEFINITION_FILE',
			{ why: `${named.join(' ')}${more > 0 ? ` And ${more} more.` : ''}` },
			Object.fromEntries(
				read.problems.map(({ path, problem }) => [path || 'file', problem.message])
			)
		);
	}
	return createStudyFrom(actor, { ...read.definition, ...(code ? { code } : {}) }, { training });
}

/** A new study from a whole definition: a template that was changed, or a file that somebody wrote. */
export async function createStudyFrom(
	actor: Actor,
	definition: StudyDefinition,
	{ training }: { training: boolean }
): Promise<{ studyId: string }> {
	const read = readDefinition(definition);
	if (!read.ok)
		throw new Refusal('DEFINITION', {
			why: read.problems.map((each) => `${each.path}: ${each.problem.message}`).join(' ')
		});
	const studyId = newId();
	return change(actor, 'study.create', {}, async (writer) => {
		const taken = await writer
			.selectFrom('study')
			.select('id')
			.where(sql`lower(code)`, '=', definition.code.toLowerCase())
			.executeTakeFirst();
		if (taken) throw codeTaken(definition.code);
		await writer
			.insertInto('study')
			.values({
				id: studyId,
				code: definition.code,
				name: definition.name,
				masked: definition.masked,
				training
			})
			.execute();
		await writer
			.insertInto('protocol_version')
			.values({
				id: newId(),
				study_id: studyId,
				number: 1,
				definition: JSON.stringify(read.definition)
			})
			.execute();
		await settleStudy(writer, studyId, read.definition);
		return { studyId };
	});
}

const codeTaken = (code: string) =>
	new Refusal('CODE_TAKEN', { code }, { code: 'There is a study with this code already.' });

/** The newest version, held for this change; refused where it is no draft. */
export async function lockedDraft(writer: Writer, studyId: string) {
	const draft = await writer
		.selectFrom('protocol_version')
		.select(['id', 'number', 'version', 'definition', 'status', 'summary'])
		.where('study_id', '=', studyId)
		.orderBy('number', 'desc')
		.limit(1)
		.forUpdate()
		.executeTakeFirst();
	if (!draft) throw new Refusal('NOT_FOUND');
	if (draft.status !== 'draft') throw new Refusal('NOT_DRAFT');
	const read = readDefinition(draft.definition);
	if (!read.ok) throw new Error(`The draft of study ${studyId} does not hold.`);
	return { ...draft, definition: read.definition };
}

export interface Published {
	protocolVersionId: string;
	version: number;
	/** Subjects who follow the new version already. */
	followed: number;
	/** The job by which many do, where it needs one. */
	jobRunId: string | null;
}

/**
 * Publishes the draft: it never changes again, its visits and measures become rows, and the study is open.
 * Refused while the check before publishing finds something that stops. An amendment says when it was approved and whether
 * people are asked again; subjects who are stay on their version until then.
 */
export const publishProtocol = (
	actor: Actor,
	studyId: string,
	version: number,
	amendment: PublishAmendmentInput = publishAmendmentInput.parse({})
): Promise<Published> =>
	change(actor, 'study.publish', { studyId }, async (writer) => {
		await holdVersion(writer, studyId, true);
		const draft = await lockedDraft(writer, studyId);
		const { definition } = draft;
		const stops = checkDefinition(definition).filter((finding) => finding.weight === 'stops');
		if (stops.length > 0)
			throw new Refusal('DEFINITION', {
				why: stops.map((finding) => finding.problem.message).join(' ')
			});
		const amends =
			draft.number > 1 ? await amendmentColumns(writer, studyId, draft, amendment) : {};
		const changed = await writer
			.updateTable('protocol_version')
			.set({
				...amends,
				status: 'published',
				published_at: clock.now(),
				published_by: actor.personId
			})
			.where('id', '=', draft.id)
			.where('version', '=', version)
			.returning(['id', 'version'])
			.execute();
		mustHaveChanged(changed);
		if (draft.number > 1) await keepZones(writer, studyId, definition);
		await settleStudy(writer, studyId, definition);
		await layOutSchedule(writer, studyId, draft.id, definition);
		await writer
			.updateTable('study')
			.set({ status: 'open' })
			.where('id', '=', studyId)
			.where('status', '=', 'draft')
			.execute();
		const following =
			draft.number > 1 ? await letFollow(writer, actor, studyId) : { followed: 0, jobRunId: null };
		return {
			protocolVersionId: draft.id,
			version: changed[0]?.version ?? version,
			...following
		};
	});

/** The version's visits, measures and grid as rows; positions count from 1 in the schedule's order. */
export async function layOutSchedule(
	writer: Writer,
	studyId: string,
	protocolVersionId: string,
	definition: StudyDefinition
): Promise<void> {
	const visits = byOrder(definition.visits).map((visit, at) => ({
		id: newId(),
		study_id: studyId,
		protocol_version_id: protocolVersionId,
		key: visit.key,
		name: visit.name,
		position: at + 1,
		spec: JSON.stringify(visit),
		length_minutes: visit.lengthMinutes
	}));
	const open = openTo(definition);
	const measures = definition.measures.map((measure, at) => ({
		id: newId(),
		study_id: studyId,
		protocol_version_id: protocolVersionId,
		key: measure.key,
		name: measure.name,
		unit: unitOfMeasure(measure) ?? '1',
		decimals: decimalsOfMeasure(measure),
		kind: measure.kind,
		position: at + 1,
		spec: JSON.stringify(measure),
		open_to: open.get(measure.key) ?? null
	}));
	await writer.insertInto('planned_visit').values(visits).execute();
	await writer.insertInto('measure').values(measures).execute();
	const measureIds = new Map(measures.map((measure) => [measure.key, measure.id]));
	const grid = visits.flatMap((visit) =>
		(definition.schedule[visit.key] ?? []).map((key) => ({
			planned_visit_id: visit.id,
			measure_id: measureIds.get(key) as string,
			study_id: studyId
		}))
	);
	if (grid.length > 0) await writer.insertInto('planned_measure').values(grid).execute();
}
