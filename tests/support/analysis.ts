import type { ImportRequest } from '../../src/lib/domain/import/import.input';
import {
	mapImport,
	startImport,
	uploadImport
} from '../../src/lib/domain/import/import.commands.server';
import { getImport } from '../../src/lib/domain/import/import.reads.server';
import type { CreateStudyInput } from '../../src/lib/domain/study/study.input';
import { createStudy } from '../../src/lib/domain/study/study.commands.server';
import type { Role } from '../../src/lib/domain/person/roles';
import { newId } from '../../src/lib/id';
import type { Actor } from '../../src/lib/server/actor';
import { actorFor } from '../../src/lib/server/auth/actor';
import { importJob } from '../../src/lib/server/imports/job';
import type { FreshDatabase } from './database';
import { addPerson, addRole, asOwner } from './people';

export { expectedFit, orthodontCsv, sleepCsv } from './reference';

export const orthodontMapping: ImportRequest = {
	subject: 'subject',
	time: { kind: 'number', column: 'time', unit: 'year' },
	visit: 'visit',
	characteristic: { column: 'sex', name: 'Sex' },
	covariates: [],
	measures: [{ column: 'distance', name: 'Distance', unit: 'mm', decimals: 1 }],
	decimalSign: '.',
	missing: [],
	site: { kind: 'site', code: '01' }
};

export interface ImportScene {
	studyId: string;
	manager: Actor;
	person(role: Role): Promise<Actor>;
}

let made = 0;

/** An unpublished study and its data manager. */
export async function importScene(
	db: FreshDatabase,
	change: Partial<CreateStudyInput> = {}
): Promise<ImportScene> {
	const account = (name: string) =>
		addPerson(db, { email: `${newId()}@example.org`, name: `${name} Weft` });
	const managerId = await account('Mara');
	await addRole(db, managerId, 'data_manager');
	const manager = await actorFor(managerId, 'scene');
	const { studyId } = await createStudy(manager, {
		template: 'imported-data',
		code: `LOOM-${++made}`,
		name: 'Loom',
		masked: false,
		training: false,
		sites: [
			{ name: 'Northmoor', zone: 'Europe/London' },
			{ name: 'Saltreach', zone: 'America/New_York' }
		],
		...change
	});
	return {
		studyId,
		manager,
		person: async (role) => {
			const id = await account(role);
			await addRole(db, id, role, studyId);
			return actorFor(id, 'scene');
		}
	};
}

/** A file all the way up to its check; gives back the batch. */
export async function checkFile(
	{ manager, studyId }: Pick<ImportScene, 'manager' | 'studyId'>,
	text: string,
	request: ImportRequest
) {
	const batch = await uploadImport(manager, studyId, {
		name: 'study.csv',
		bytes: Buffer.from(text, 'utf8')
	});
	await mapImport(manager, studyId, batch.id, batch.version, request);
	const { jobRunId } = await startImport(manager, studyId, batch.id, { dryRun: true });
	await importJob({ payload: { batchId: batch.id, jobRunId, dryRun: true }, lastTry: true });
	return getImport(manager, studyId, batch.id);
}

/** The import itself, as the worker does it. */
export async function runImport(
	{ manager, studyId }: Pick<ImportScene, 'manager' | 'studyId'>,
	batchId: string
) {
	const { jobRunId } = await startImport(manager, studyId, batchId, { dryRun: false });
	await importJob({ payload: { batchId, jobRunId, dryRun: false }, lastTry: true });
	return getImport(manager, studyId, batchId);
}

export async function importFile(
	scene: Pick<ImportScene, 'manager' | 'studyId'>,
	text: string,
	request: ImportRequest
) {
	const { id } = await checkFile(scene, text, request);
	return runImport(scene, id);
}

/**
 * Allocations as a loaded list would have them, for subjects that came from a file: `armOf` says which of the arms 'a' and
 * 'b' each is in. Arm a is letter A.
 */
export async function allocate(
	db: FreshDatabase,
	studyId: string,
	armOf: (importedAs: string) => 'a' | 'b'
): Promise<void> {
	const [subjects = []] = (await db.sql(
		`select id, imported_as from app.subject where study_id = '${studyId}' order by number`
	)) as [{ id: string; imported_as: string }[]];
	await asOwner(db, async (client) => {
		const listId = newId();
		await client.query(
			`insert into closed.allocation_list (id, study_id, seed, block_sizes, method, hash) values ($1, $2, 'seed', '{4}', 'a test', 'none')`,
			[listId, studyId]
		);
		await client.query(
			`insert into closed.arm_letter (study_id, arm_key, letter) values ($1, 'a', 'A'), ($1, 'b', 'B')`,
			[studyId]
		);
		for (const [at, subject] of subjects.entries())
			await client.query(
				`insert into closed.list_position (id, study_id, list_id, stratum, position, arm_key, kit_number, subject_id, used_at)
				values ($1, $2, $3, '{}', $4, $5, $6, $7, now())`,
				[newId(), studyId, listId, at + 1, armOf(subject.imported_as), `K${at}`, subject.id]
			);
		await client.query(
			`update app.subject set randomised_at = now(), randomised_on = current_date where study_id = $1`,
			[studyId]
		);
	});
}
