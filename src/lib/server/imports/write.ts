import { sql } from 'kysely';
import type { ImportPlan, PlannedSubject } from '$lib/domain/import/plan';
import { missingInFile } from '$lib/domain/import/protocol';
import { layOutSchedule } from '$lib/domain/study/study.commands.server';
import { nextSubjectNumbers } from '$lib/domain/subject/subject.commands.server';
import { newId } from '$lib/id';
import { clock } from '$lib/time/clock';
import { dateInZone } from '$lib/time/zones';
import type { Actor } from '../actor';
import { mustHaveChanged, type Writer } from '../change';

const batchRows = 1000;

/** Rows as JSON, a thousand at a time: one parameter a statement, whatever the number of columns. */
async function insertRows(
	writer: Writer,
	table: 'subject' | 'visit' | 'measurement',
	columns: Record<string, string>,
	rows: readonly Record<string, unknown>[],
	after: (written: number) => Promise<void>
): Promise<void> {
	const names = Object.keys(columns);
	const shape = names.map((name) => `${name} ${columns[name]}`).join(', ');
	for (let at = 0; at < rows.length; at += batchRows) {
		const part = JSON.stringify(rows.slice(at, at + batchRows));
		await sql`insert into ${sql.table(`app.${table}`)} (${sql.raw(names.join(', '))})
			select ${sql.raw(names.join(', '))} from jsonb_to_recordset(${part}::jsonb) as t(${sql.raw(shape)})`.execute(
			writer
		);
		await after(Math.min(at + batchRows, rows.length));
	}
}

/** Publishes the protocol version that the file describes, in the place of the draft. */
async function publish(
	writer: Writer,
	actor: Actor,
	studyId: string,
	version: { id: string; version: number },
	definition: NonNullable<ImportPlan['definition']>
): Promise<void> {
	const changed = await writer
		.updateTable('protocol_version')
		.set({
			definition: JSON.stringify(definition),
			status: 'published',
			published_at: clock.now(),
			published_by: actor.personId
		})
		.where('id', '=', version.id)
		.where('version', '=', version.version)
		.where('status', '=', 'draft')
		.returning('id')
		.execute();
	mustHaveChanged(changed);
	await layOutSchedule(writer, studyId, version.id, definition);
	await writer
		.updateTable('study')
		.set({ status: 'open' })
		.where('id', '=', studyId)
		.where('status', '=', 'draft')
		.execute();
}

async function idsByKey(
	writer: Writer,
	table: 'measure' | 'planned_visit',
	protocolVersionId: string
): Promise<Map<string, string>> {
	const rows = await writer
		.selectFrom(table)
		.select(['id', 'key'])
		.where('protocol_version_id', '=', protocolVersionId)
		.execute();
	return new Map(rows.map(({ id, key }) => [key, id]));
}

/** New subjects get the next numbers of their sites, in the order in which they stand in the file. */
async function numbers(
	writer: Writer,
	studyId: string,
	subjects: readonly PlannedSubject[],
	sites: ReadonlyMap<string, { id: string; code: string }>
): Promise<Map<PlannedSubject, string>> {
	const given = new Map<PlannedSubject, string>();
	for (const site of sites.values()) {
		const fresh = subjects.filter(({ id, siteId }) => id === null && siteId === site.id);
		if (fresh.length === 0) continue;
		const next = await nextSubjectNumbers(writer, studyId, site, fresh.length);
		fresh.forEach((subject, at) => given.set(subject, next[at] as string));
	}
	return given;
}

/** Writes a plan that has no problem. In one transaction with whatever else its caller does; what it throws undoes all. */
export async function writePlan(
	writer: Writer,
	actor: Actor,
	studyId: string,
	version: { id: string; version: number },
	plan: ImportPlan,
	progress: (fraction: number, message: string) => Promise<void>
): Promise<void> {
	if (plan.definition) await publish(writer, actor, studyId, version, plan.definition);
	const measureIds = await idsByKey(writer, 'measure', version.id);
	const visitIds = await idsByKey(writer, 'planned_visit', version.id);
	const units = new Map(
		(
			await writer
				.selectFrom('measure')
				.select(['key', 'unit'])
				.where('protocol_version_id', '=', version.id)
				.execute()
		).map(({ key, unit }) => [key, unit])
	);
	const siteRows = await writer
		.selectFrom('site')
		.select(['id', 'code', 'zone'])
		.where('study_id', '=', studyId)
		.execute();
	const sites = new Map(siteRows.map((site) => [site.id, site]));
	const given = await numbers(writer, studyId, plan.subjects, sites);
	const {
		rows: [moment]
	} = await sql<{ now: Date }>`select app.now() as now`.execute(writer);
	const now = moment?.now as Date;

	const subjects: Record<string, unknown>[] = [];
	const visits: Record<string, unknown>[] = [];
	const measurements: Record<string, unknown>[] = [];
	for (const subject of plan.subjects) {
		const id = subject.id ?? newId();
		const whose = { study_id: studyId, site_id: subject.siteId };
		if (subject.id === null)
			subjects.push({
				id,
				...whose,
				protocol_version_id: version.id,
				number: given.get(subject),
				imported_as: subject.name,
				// A file without dates does not say when a subject came in: the day of the import stands there.
				enrolled_on:
					subject.enrolledOn ?? dateInZone(now, sites.get(subject.siteId)?.zone ?? 'UTC'),
				characteristics: subject.characteristics
			});
		for (const visit of subject.visits) {
			const visitId = newId();
			visits.push({
				id: visitId,
				...whose,
				subject_id: id,
				planned_visit_id: visit.key === null ? null : visitIds.get(visit.key),
				name: visit.name,
				position: visit.position,
				status: 'completed',
				happened_on: visit.happenedOn,
				study_time: visit.studyTime,
				finished_at: now,
				finished_by: actor.personId
			});
			visit.values.forEach((value, at) => {
				const key = plan.measureKeys[at] as string;
				measurements.push({
					id: newId(),
					...whose,
					subject_id: id,
					visit_id: visitId,
					measure_id: measureIds.get(key),
					value,
					unit: units.get(key) ?? '1',
					entered_value: value,
					entered_unit: value === null ? null : (units.get(key) ?? '1'),
					not_done_reason: value === null ? missingInFile : null,
					entered_at: now,
					taken_by: actor.personId,
					source: 'import'
				});
			});
		}
	}
	const total = Math.max(1, subjects.length + visits.length + measurements.length);
	let before = 0;
	const telling = (what: string) => async (written: number) =>
		progress(
			0.25 + (0.7 * (before + written)) / total,
			`Writing ${what}: ${(before + written).toLocaleString('en-GB')} of ${total.toLocaleString('en-GB')} rows.`
		);
	await insertRows(
		writer,
		'subject',
		{
			id: 'uuid',
			study_id: 'uuid',
			site_id: 'uuid',
			protocol_version_id: 'uuid',
			number: 'text',
			imported_as: 'text',
			enrolled_on: 'date',
			characteristics: 'jsonb'
		},
		subjects,
		telling('subjects')
	);
	before += subjects.length;
	await insertRows(
		writer,
		'visit',
		{
			id: 'uuid',
			study_id: 'uuid',
			site_id: 'uuid',
			subject_id: 'uuid',
			planned_visit_id: 'uuid',
			name: 'text',
			position: 'integer',
			status: 'text',
			happened_on: 'date',
			study_time: 'numeric',
			finished_at: 'timestamptz',
			finished_by: 'uuid'
		},
		visits,
		telling('visits')
	);
	before += visits.length;
	await insertRows(
		writer,
		'measurement',
		{
			id: 'uuid',
			study_id: 'uuid',
			site_id: 'uuid',
			subject_id: 'uuid',
			visit_id: 'uuid',
			measure_id: 'uuid',
			value: 'numeric',
			unit: 'text',
			entered_value: 'numeric',
			entered_unit: 'text',
			not_done_reason: 'text',
			entered_at: 'timestamptz',
			taken_by: 'uuid',
			source: 'text'
		},
		measurements,
		telling('measurements')
	);
}
