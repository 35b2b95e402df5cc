import { hashPassword } from '../../src/lib/server/auth/password';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { forgetSender } from '../../src/lib/server/jobs/queue';
import { newId } from '../../src/lib/id';
import type { Role } from '../../src/lib/domain/person/roles';
import { keepScan } from '../../src/lib/domain/upload/upload.commands.server';
import { freezeCut } from '../../src/lib/domain/cut/cut.commands.server';
import { uploadImport } from '../../src/lib/domain/import/import.commands.server';
import { requestLook } from '../../src/lib/domain/look/look.commands.server';
import { sign } from '../../src/lib/domain/signature/signature.commands.server';
import { findWaiting } from '../../src/lib/domain/signature/signature.reads.server';
import { startSession } from '../../src/lib/server/auth/session';
import { systemActor } from '../../src/lib/server/actor';
import { actorFor } from '../../src/lib/server/auth/actor';
import { useEnvironment, type FreshDatabase } from './database';
import { addPerson, addRole, asOwner, signIn, type Visitor } from './people';
import type { RunningServer } from './server';
import { smallPdf } from './files';
import { addSubject, around, visitScene, type Scene } from './visit-scene';

const password = 'linen warp and weft';
const siteRoles: Role[] = ['coordinator', 'nurse', 'pharmacist', 'investigator', 'monitor'];
const studyRoles: Role[] = [
	'data_manager',
	'auditor',
	'statistician',
	'independent_statistician',
	'board_member'
];

/** What a study holds one of each of, by the name of the parameter that names it in an address. */
export type Things = Record<string, string>;

export interface Crowd {
	database: Database;
	scene: Scene;
	things: Things;
	/** Another study with the same things in it. */
	foreign: { scene: Scene; things: Things };
	/** The same at the study's other site. */
	otherSite: Things;
	/** By role; at the first site where the role has one. */
	by: Record<string, Visitor>;
	/** Signs a person in again, for tests that end sessions. */
	again(who: string): Promise<Visitor>;
	close(): Promise<void>;
}

/** A checklist that an investigator of the site has signed, by the application's own command. */
async function signedChecklist(
	database: FreshDatabase,
	scene: Scene,
	siteIndex: 0 | 1,
	passwordHash: string
): Promise<string> {
	const site = scene.sites[siteIndex];
	const email = `signer-${newId()}@walk.example`;
	const name = 'Ida Reyes';
	const id = await addPerson(database, { email, name, passwordHash });
	await addRole(database, id, 'investigator', scene.studyId, site.id);
	const screening = newId();
	const answers = Object.fromEntries(
		scene.definition.eligibility.map((each) => [each.key, each.kind === 'inclusion' ? 'yes' : 'no'])
	);
	await asOwner(database, (client) =>
		client.query(
			`insert into app.screening (id, study_id, site_id, number, screened_on, eligibility)
			values ($1, $2, $3, $4, '2026-01-06', $5)`,
			[
				screening,
				scene.studyId,
				site.id,
				950 + siteIndex,
				JSON.stringify({ answers, protocolVersion: 1 })
			]
		)
	);
	const sessionId = await startSession({ id, name, email }, 'password', 'scene', 'scene');
	const actor = { ...(await actorFor(id, 'scene')), sessionId };
	const { items } = await findWaiting(actor, scene.studyId);
	const { signatures } = await sign(actor, scene.studyId, {
		items: items.map(({ record, recordId, meaning, sha256 }) => ({
			record,
			recordId,
			meaning,
			sha256
		})),
		email,
		password
	});
	return signatures[0]?.id as string;
}

/** One of everything in a study, put there by its owner: what matters is that it is there. */
async function furnish(
	server: RunningServer,
	scene: Scene,
	siteIndex: 0 | 1,
	passwordHash: string
): Promise<Things> {
	const { database } = server;
	const site = scene.sites[siteIndex];
	const keys = Object.keys(scene.plannedVisits);
	const subject = await addSubject(database, scene, {
		site,
		windows: Object.fromEntries(keys.slice(0, 2).map((key) => [key, around('2026-06-09')]))
	});
	const visit = subject.visits[keys[0] ?? ''] ?? '';
	const made: Things = {
		study: scene.studyId,
		subject: subject.id,
		visit,
		measure: scene.measures.weight ?? '',
		screening: newId(),
		measurement: newId(),
		appointment: newId(),
		job: newId(),
		report: newId(),
		release: newId(),
		delivery: newId(),
		print: newId(),
		person: site.nurse.id,
		site: site.id,
		token: 'a-token-that-opens-nothing-at-all-000000000'
	};
	await asOwner(database, async (client) => {
		const insert = (text: string, values: unknown[]) => client.query(text, values);
		const by = scene.manager.id;
		await insert(
			`insert into app.screening (id, study_id, site_id, number, screened_on) values ($1, $2, $3, $4, '2026-01-05')`,
			[made.screening, scene.studyId, site.id, 900 + siteIndex]
		);
		await insert(
			`insert into app.measurement (id, study_id, site_id, subject_id, visit_id, measure_id, value, unit, taken_by, source)
			values ($1, $2, $3, $4, $5, $6, 71.5, 'kg', $7, 'import')`,
			[made.measurement, scene.studyId, site.id, subject.id, visit, made.measure, site.nurse.id]
		);
		await insert(
			`insert into app.job_run (id, queue, title, study_id, requested_by) values ($1, 'import', 'An import', $2, $3)`,
			[made.job, scene.studyId, by]
		);
		await insert(
			`insert into app.kit_delivery (id, study_id, site_id, number, kits, expires_on, sent_by) values ($1, $2, $3, 1, 4, '2031-01-01', $4)`,
			[made.delivery, scene.studyId, site.id, by]
		);
		await insert(
			`insert into app.code_print (id, study_id, site_id, asked_by) values ($1, $2, $3, $4)`,
			[made.print, scene.studyId, site.id, by]
		);
	});
	const manager = await actorFor(scene.manager.id, 'scene');
	const batch = await uploadImport(manager, scene.studyId, {
		name: 'file.csv',
		bytes: Buffer.from('subject,time,weight\nA,0,70\nA,1,71\n')
	});
	const cut = await freezeCut(manager, scene.studyId, { label: 'A cut', cutOffAt: '' });
	const look = await requestLook(systemActor(newId()), scene.studyId, {
		cutId: cut.id,
		measure: 'weight',
		timeUnit: 'month',
		group: 'none',
		covariates: [],
		ownLevel: 'yes',
		method: 'REML',
		df: 'kenward-roger'
	});
	const consents = await database.sql(
		`select id from app.consent where subject_id = '${subject.id}'`
	);
	made.consent = consents[0]?.[0]?.id as string;
	made.scan = (
		await keepScan(await actorFor(site.coordinator.id, 'scene'), scene.studyId, made.consent, {
			bytes: smallPdf,
			name: 'form.pdf',
			type: 'application/pdf',
			reason: ''
		})
	).id;
	made.signature = await signedChecklist(database, scene, siteIndex, passwordHash);
	Object.assign(made, { batch: batch.id, cut: cut.id, look: look.id });
	await asOwner(database, async (client) => {
		const insert = (text: string, values: unknown[]) => client.query(text, values);
		const by = scene.manager.id;
		await insert(
			`insert into app.report (id, study_id, look_id, kind, made_by) values ($1, $2, $3, 'open', $4)`,
			[made.report, scene.studyId, made.look, by]
		);
		await insert(
			`insert into app.release (id, study_id, report_id, person_id, asked_by) values ($1, $2, $3, $4, $4)`,
			[made.release, scene.studyId, made.report, by]
		);
	});
	return made;
}

/** A running server with a study full of things and one person signed in for each role. */
export async function crowd(server: RunningServer): Promise<Crowd> {
	useEnvironment(server.database, { ORIGIN: server.origin });
	const database = openDatabase(server.database.appUrl, 3);
	useDatabase(database);
	forgetSender();
	const passwordHash = await hashPassword(password);
	const scene = await visitScene(server.database, { code: 'WLK-1', passwordHash });
	const other = await visitScene(server.database, { code: 'FGN-2', passwordHash });
	const things = await furnish(server, scene, 0, passwordHash);
	const otherSite = await furnish(server, scene, 1, passwordHash);
	const foreign = { scene: other, things: await furnish(server, other, 0, passwordHash) };

	const emails: Record<string, string> = {};
	const add = async (who: string, ...grants: [Role, string | null, string | null][]) => {
		const email = `${who.replaceAll(/[^a-z]+/g, '-')}@walk.example`;
		emails[who] = email;
		const id = await addPerson(server.database, { email, name: `The ${who}`, passwordHash });
		for (const grant of grants) await addRole(server.database, id, ...grant);
	};
	for (const role of siteRoles) {
		await add(role, [role, scene.studyId, scene.sites[0].id]);
		await add(`${role} elsewhere`, [role, scene.studyId, scene.sites[1].id]);
	}
	for (const role of studyRoles) await add(role, [role, scene.studyId, null]);
	await add('data_manager everywhere', ['data_manager', null, null]);
	await add('administrator', ['administrator', null, null]);
	await add('nobody');
	await add(
		'stranger',
		...(['data_manager', 'coordinator', 'nurse', 'monitor', 'auditor'] as Role[]).map(
			(role): [Role, string, null] => [role, other.studyId, null]
		)
	);
	const by: Record<string, Visitor> = {};
	const again = async (who: string) => {
		await server.database.sql('delete from app.rate_limit');
		return (by[who] = await signIn(server, emails[who] as string, password));
	};
	for (const who of Object.keys(emails)) await again(who);
	return {
		database,
		scene,
		things,
		otherSite,
		foreign,
		by,
		again,
		close: () => database.close()
	};
}
