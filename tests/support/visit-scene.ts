import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { root } from '../../scripts/lib/places.mjs';
import type { Role } from '../../src/lib/domain/person/roles';
import { openTo, type StudyDefinition } from '../../src/lib/domain/study/definition';
import { newId } from '../../src/lib/id';
import type { Actor } from '../../src/lib/server/actor';
import { addDays, plainDateOf, type PlainDate } from '../../src/lib/time/dates';
import type { FreshDatabase } from './database';
import { addPerson, addRole, asOwner } from './people';

export interface Person {
	id: string;
	email: string;
	name: string;
	/** For calling commands in this process; a browser's test signs in instead. */
	actor: Actor;
}

export interface SceneSite {
	id: string;
	zone: string;
	rooms: string[];
	coordinator: Person;
	nurse: Person;
}

export interface Scene {
	studyId: string;
	definition: StudyDefinition;
	protocolVersionId: string;
	/** Berlin, then New York. */
	sites: [SceneSite, SceneSite];
	manager: Person;
	/** Measure ids by key. */
	measures: Record<string, string>;
	plannedVisits: Record<string, string>;
}

function template(): StudyDefinition {
	const file = join(root, 'templates/studies/two-arm-trial.json');
	const { $schema, ...definition } = JSON.parse(readFileSync(file, 'utf8'));
	void $schema;
	return { ...definition, eligibilitySigned: false } as StudyDefinition;
}

export async function addActor(
	database: FreshDatabase,
	name: string,
	role: Role,
	studyId: string | null,
	siteId: string | null = null,
	passwordHash?: string
): Promise<Person> {
	const email = `${name.toLowerCase().replaceAll(' ', '.')}@example.org`;
	const id = await addPerson(database, { email, name, passwordHash });
	await addRole(database, id, role, studyId, siteId);
	const { actorFor } = passwordHash
		? { actorFor: async () => null as unknown as Actor }
		: await import('../../src/lib/server/auth/actor');
	return { id, email, name, actor: await actorFor(id, 'test') };
}

/** The study as publishing lays it out, by statements: a browser's test runs without the program's own modules. */
async function publish(database: FreshDatabase, definition: StudyDefinition): Promise<string> {
	const studyId = newId();
	const versionId = newId();
	await asOwner(database, async (client) => {
		const put = (table: string, row: Record<string, unknown>) =>
			client.query(
				`insert into app.${table} (${Object.keys(row).join(', ')}) values (${Object.keys(row)
					.map((_, at) => `$${at + 1}`)
					.join(', ')})`,
				Object.values(row)
			);
		const { code, name, masked } = definition;
		await put('study', { id: studyId, code, name, masked, status: 'open' });
		await put('protocol_version', {
			id: versionId,
			study_id: studyId,
			number: 1,
			definition: JSON.stringify(definition),
			status: 'published',
			published_at: '2025-01-10T09:00:00Z'
		});
		for (const site of definition.sites) {
			const siteId = newId();
			await put('site', {
				id: siteId,
				study_id: studyId,
				code: site.code,
				name: site.name,
				zone: site.zone,
				opening: JSON.stringify(site.openingHours),
				approved_on: '2020-01-01'
			});
			for (const room of site.rooms)
				await put('room', { id: newId(), study_id: studyId, site_id: siteId, name: room.name });
		}
		for (const consent of definition.consentVersions)
			await put('consent_version', {
				id: newId(),
				study_id: studyId,
				label: consent.version,
				approved_on: '2025-01-05'
			});
		const open = openTo(definition);
		const measures = new Map<string, string>();
		for (const [at, measure] of definition.measures.entries()) {
			const id = newId();
			measures.set(measure.key, id);
			await put('measure', {
				id,
				study_id: studyId,
				protocol_version_id: versionId,
				key: measure.key,
				name: measure.name,
				unit: 'unit' in measure ? measure.unit : '1',
				decimals: 'decimals' in measure ? measure.decimals : 0,
				kind: measure.kind,
				position: at + 1,
				spec: JSON.stringify(measure),
				open_to: open.get(measure.key) ?? null
			});
		}
		for (const [at, visit] of definition.visits.entries()) {
			const id = newId();
			await put('planned_visit', {
				id,
				study_id: studyId,
				protocol_version_id: versionId,
				key: visit.key,
				name: visit.name,
				position: at + 1,
				spec: JSON.stringify(visit),
				length_minutes: visit.lengthMinutes
			});
			for (const key of definition.schedule[visit.key] ?? [])
				await put('planned_measure', {
					planned_visit_id: id,
					measure_id: measures.get(key),
					study_id: studyId
				});
		}
	});
	return studyId;
}

/** A published trial at two sites with their people; nobody is enrolled yet. */
export async function visitScene(
	database: FreshDatabase,
	{
		code = 'AMR-01',
		passwordHash,
		change = (definition) => definition
	}: {
		code?: string;
		passwordHash?: string;
		change?: (definition: StudyDefinition) => StudyDefinition;
	} = {}
): Promise<Scene> {
	const tag = code.toLowerCase();
	const manager = await addActor(
		database,
		`Mara Quist ${tag}`,
		'data_manager',
		null,
		null,
		passwordHash
	);
	const definition: StudyDefinition = change({ ...template(), code, name: 'Aldermere' });
	const studyId = await publish(database, definition);
	const [siteRows, roomRows, versionRows, measureRows, visitRows] = await database.sql(
		`select id, zone from app.site where study_id = '${studyId}' order by code`,
		`select id, site_id from app.room where study_id = '${studyId}' order by name`,
		`select id from app.protocol_version where study_id = '${studyId}'`,
		`select id, key from app.measure where study_id = '${studyId}'`,
		`select id, key from app.planned_visit where study_id = '${studyId}'`
	);
	const byKey = (rows: { id: string; key: string }[] = []) =>
		Object.fromEntries(rows.map((row) => [row.key, row.id]));
	const siteAt = async (index: number, names: [string, string]): Promise<SceneSite> => {
		const row = siteRows?.[index];
		const [coordinator, nurse] = names;
		return {
			id: row.id,
			zone: row.zone,
			rooms: (roomRows ?? []).filter((room) => room.site_id === row.id).map((room) => room.id),
			coordinator: await addActor(
				database,
				`${coordinator} ${tag}`,
				'coordinator',
				studyId,
				row.id,
				passwordHash
			),
			nurse: await addActor(database, `${nurse} ${tag}`, 'nurse', studyId, row.id, passwordHash)
		};
	};
	return {
		studyId,
		definition,
		protocolVersionId: versionRows?.[0].id,
		sites: [
			await siteAt(0, ['Cora Brandt', 'Nils Ohm']),
			await siteAt(1, ['Cleo Marsh', 'Nora Wake'])
		],
		manager,
		measures: byKey(measureRows),
		plannedVisits: byKey(visitRows)
	};
}

let running = 0;

export interface SceneSubject {
	id: string;
	number: string;
	/** Visit ids by the schedule's keys. */
	visits: Record<string, string>;
}

export interface NewSubject {
	site?: SceneSite;
	/** The windows to make, by key of the visit: first, ideal and last day. */
	windows: Record<string, [string, string, string]>;
	email?: string | null;
	consentedAt?: string | null;
	characteristics?: Record<string, unknown>;
}

/** A subject with consent, contact details and just these windows. */
export async function addSubject(
	database: FreshDatabase,
	scene: Scene,
	{
		site = scene.sites[0],
		windows,
		email = null,
		consentedAt = '2025-06-01T09:00:00Z',
		characteristics = { sex: 'female', 'birth-date': '1971-03-02' }
	}: NewSubject
): Promise<SceneSubject> {
	const id = newId();
	running += 1;
	const number = `02-${String(running).padStart(4, '0')}-0`;
	const visits: Record<string, string> = {};
	await asOwner(database, async (client) => {
		await client.query(
			`insert into app.subject (id, study_id, site_id, protocol_version_id, number, enrolled_on, characteristics)
			values ($1, $2, $3, $4, $5, '2025-06-01', $6)`,
			[id, scene.studyId, site.id, scene.protocolVersionId, number, JSON.stringify(characteristics)]
		);
		await client.query(
			`insert into app.contact_details (subject_id, study_id, site_id, name, email, phone) values ($1, $2, $3, $4, $5, '+49 30 000000')`,
			[id, scene.studyId, site.id, `Person ${running}`, email]
		);
		if (consentedAt !== null) {
			const screening = newId();
			await client.query(
				`insert into app.screening (id, study_id, site_id, number, screened_on, outcome, subject_id)
				values ($1, $2, $3, $4, '2025-06-01', 'entered', $5)`,
				[screening, scene.studyId, site.id, running, id]
			);
			await client.query(
				`insert into app.consent (id, study_id, site_id, screening_id, subject_id, consent_version_id, signed_at, signed_by, explained_by, copy_given)
				select $1, $2, $3, $4, $5, c.id, $6, 'participant', $7, true from app.consent_version c where c.study_id = $2 limit 1`,
				[newId(), scene.studyId, site.id, screening, id, consentedAt, site.coordinator.id]
			);
		}
		for (const [key, [earliest, target, latest]] of Object.entries(windows)) {
			const visit = newId();
			visits[key] = visit;
			const plan = scene.definition.visits.find((each) => each.key === key);
			await client.query(
				`insert into app.visit (id, study_id, site_id, subject_id, planned_visit_id, name, position, earliest, target, latest)
				values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10)`,
				[
					visit,
					scene.studyId,
					site.id,
					id,
					scene.plannedVisits[key],
					plan?.name ?? key,
					plan?.order ?? 1,
					earliest,
					target,
					latest
				]
			);
		}
	});
	return { id, number, visits };
}

/** A window around a day: so many days before and after. */
export const around = (day: string, before = 7, after = 7): [PlainDate, PlainDate, PlainDate] => {
	const target = plainDateOf(day);
	return [addDays(target, -before), target, addDays(target, after)];
};
