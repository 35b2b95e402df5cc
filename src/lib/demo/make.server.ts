import { recommend } from '$lib/domain/board/board.server';
import { mapImport, startImport, uploadImport } from '$lib/domain/import/import.commands.server';
import { approveSite } from '$lib/domain/site/site.commands.server';
import { findSiteViews } from '$lib/domain/site/site.reads.server';
import { downloadCopy } from '$lib/domain/report/report-file.server';
import {
	approveRelease,
	makeReport,
	releaseReport
} from '$lib/domain/report/report.commands.server';
import {
	createStudy,
	createStudyFrom,
	definitionFrom,
	publishProtocol
} from '$lib/domain/study/study.commands.server';
import { findTemplate } from '$lib/domain/study/templates.server';
import { askForList } from '$lib/domain/randomisation/allocation.commands.server';
import { freezeCut } from '$lib/domain/cut/cut.commands.server';
import { requestLook } from '$lib/domain/look/look.commands.server';
import { signPlan } from '$lib/domain/look/plan.server';
import type { LookSpec } from '$lib/domain/look/look.input';
import { setUp, setUpLink } from '$lib/domain/person/link.commands.server';
import { newId } from '$lib/id';
import type { Actor } from '$lib/server/actor';
import { systemActor } from '$lib/server/actor';
import { readOwn } from '$lib/server/change';
import { roleAllowing } from '$lib/server/permission';
import { useDatabase, type Database } from '$lib/server/db/db';
import { closedHandlers, openHandlers } from '$lib/server/jobs/handlers';
import type { QueueName, QueuePayloads } from '$lib/server/jobs/queue';
import { clock } from '$lib/time/clock';
import { addDays, plainDateOf, type PlainDate } from '$lib/time/dates';
import { aldermere, aldermereSites, withTellingMeasure } from './aldermere';
import { larkfieldFile } from './larkfield';
import { Trial, type Cast, type SiteCast } from './play-aldermere.server';
import {
	acting,
	at,
	demoPassword,
	give,
	join,
	leaveStage,
	postMail,
	takeStage
} from './stage.server';

/** The two sides of the database: the demo stands in for all three processes. */
export interface Sides {
	app: Database;
	unmasked: Database;
}

export interface DemoAccount {
	role: string;
	email: string;
	password: string;
	note: string;
}

type Tell = (share: number, text: string) => void;

const address = (name: string) => `${name}@demo.example`;

/** The people of the demo, each invited and let in by the administrators. */
async function people(): Promise<Record<string, string>> {
	const link = await setUpLink(newId());
	await setUp(
		link?.split('/').pop() ?? '',
		{ email: address('admin'), name: 'Ines Varga', password: demoPassword },
		newId()
	);
	const first = await readOwn(systemActor('demo'), (reader) =>
		reader
			.selectFrom('person')
			.select('id')
			.where('email', '=', address('admin'))
			.executeTakeFirstOrThrow()
	);
	const administrator = await acting(first.id);
	const ids: Record<string, string> = { admin: first.id };
	const invited: [string, string][] = [
		['deputy', 'Oskar Lindqvist'],
		['data', 'Mirela Kant'],
		['statistician', 'Theo Brandvik'],
		['independent', 'Salome Reyes'],
		['auditor', 'Piet Wassen'],
		['monitor', 'Aroha Tamm'],
		['board', 'Henrike Olausson'],
		['board2', 'Desmond Ake']
	];
	const sites: [string, string, string, string, string, string][] = [
		['north', 'Greta Holm', 'Bram Oyelaran', 'Lena Fosse', 'Dr Ewan Marsh', 'Sunniva Abel'],
		['', 'Juno Pell', 'Maren Stadt', 'Tariq Aalto', 'Dr Celia Roon', 'Jorin Vask'],
		['tarn', 'Kaija Virta', 'Anselm Dube', 'Rosa Kivi', 'Dr Petri Salo', 'Edda Monroe'],
		['quill', 'Noah Wills', 'Priya Tane', 'Hugo Blythe', 'Dr May Corrin', 'Otis Brann']
	];
	for (const [site, coordinator, nurse, second, investigator, pharmacist] of sites)
		invited.push(
			[site ? `coordinator-${site}` : 'coordinator', coordinator],
			[site ? `nurse-${site}` : 'nurse', nurse],
			[site ? `nurse-${site}-2` : 'nurse-2', second],
			[site ? `investigator-${site}` : 'investigator', investigator],
			[site ? `pharmacist-${site}` : 'pharmacist', pharmacist]
		);
	for (const [name, full] of invited)
		ids[name] = await join(administrator, { email: address(name), name: full });
	return ids;
}

/** Lets a queued job's own code do its work now, at the demo's time, on its own side of the database. */
async function work<Q extends QueueName>(sides: Sides, queue: Q, payload: QueuePayloads[Q]) {
	const closed = closedHandlers[queue];
	const handler = closed ?? openHandlers[queue];
	if (!handler) throw new Error(`Nobody works on the queue ${queue}`);
	if (closed) useDatabase(sides.unmasked);
	try {
		await (handler as (d: { payload: QueuePayloads[Q]; lastTry: boolean }) => Promise<void>)({
			payload,
			lastTry: true
		});
	} finally {
		useDatabase(sides.app);
	}
}

const id = (ids: Record<string, string>, name: string): string => {
	const found = ids[name];
	if (!found) throw new Error(`There is no ${name} in the demo`);
	return found;
};

async function castOf(ids: Record<string, string>, studyId: string, sides: Sides): Promise<Cast> {
	const { sites, rooms, consent, criteria } = await readOwn(
		systemActor('demo'),
		async (reader) => ({
			sites: await reader
				.selectFrom('site')
				.select(['id', 'code'])
				.where('study_id', '=', studyId)
				.orderBy('code')
				.execute(),
			rooms: await reader
				.selectFrom('room')
				.select(['id', 'site_id', 'name'])
				.where('study_id', '=', studyId)
				.orderBy('name')
				.execute(),
			consent: await reader
				.selectFrom('consent_version')
				.select('id')
				.where('study_id', '=', studyId)
				.executeTakeFirstOrThrow(),
			criteria: (
				await reader
					.selectFrom('protocol_version')
					.select('definition')
					.where('study_id', '=', studyId)
					.executeTakeFirstOrThrow()
			).definition as { eligibility: Cast['criteria'] }
		})
	);
	const suffixes = ['-north', '', '-tarn', '-quill'];
	const casts: SiteCast[] = [];
	for (const [n, site] of sites.entries()) {
		const own = rooms.filter((room) => room.site_id === site.id);
		casts.push({
			id: site.id,
			coordinator: await acting(id(ids, `coordinator${suffixes[n]}`)),
			investigator: await acting(id(ids, `investigator${suffixes[n]}`)),
			pharmacist: await acting(id(ids, `pharmacist${suffixes[n]}`)),
			pairs: [
				{ roomId: own[0]?.id ?? '', nurse: await acting(id(ids, `nurse${suffixes[n]}`)) },
				{ roomId: own[1]?.id ?? '', nurse: await acting(id(ids, `nurse${suffixes[n]}-2`)) }
			]
		});
	}
	return {
		studyId,
		consentVersionId: consent.id,
		criteria: criteria.eligibility,
		sites: casts,
		unmasked: sides.unmasked
	};
}

async function grantAll(
	ids: Record<string, string>,
	studyId: string,
	sites: string[]
): Promise<void> {
	const administrator = await acting(id(ids, 'admin'));
	const deputy = await acting(id(ids, 'deputy'));
	const grant = (name: string, role: Parameters<typeof give>[3], siteId = '') =>
		give(administrator, deputy, id(ids, name), role, studyId, siteId);
	await grant('statistician', 'statistician');
	await grant('independent', 'independent_statistician');
	await grant('auditor', 'auditor');
	await grant('board', 'board_member');
	await grant('board2', 'board_member');
	for (const [n, suffix] of ['-north', '', '-tarn', '-quill'].entries()) {
		const siteId = sites[n];
		if (!siteId) continue;
		await grant(`coordinator${suffix}`, 'coordinator', siteId);
		await grant(`nurse${suffix}`, 'nurse', siteId);
		await grant(`nurse${suffix}-2`, 'nurse', siteId);
		await grant(`investigator${suffix}`, 'investigator', siteId);
		await grant(`pharmacist${suffix}`, 'pharmacist', siteId);
	}
	for (const siteId of [sites[1], sites[2]]) if (siteId) await grant('monitor', 'monitor', siteId);
}

const plan: LookSpec = {
	measure: 'egfr',
	timeUnit: 'year',
	group: 'arms',
	covariates: ['site'],
	ownLevel: 'yes',
	method: 'REML',
	df: 'kenward-roger'
};

/** The trial from its first day to this one, with a cut, a pooled look and the plan's look by arm. */
async function trial(
	ids: Record<string, string>,
	sides: Sides,
	now: Date,
	today: PlainDate,
	tell: Tell
): Promise<string> {
	const people = aldermere(today);
	const begun = addDays(people[0]?.enrolsOn ?? today, -14);
	at(new Date(`${addDays(begun, -7)}T09:00:00Z`));
	const manager = await acting(id(ids, 'data'));
	const template = findTemplate('two-arm-trial');
	if (!template) throw new Error('The template two-arm-trial is not there');
	const definition = definitionFrom(withTellingMeasure(template.definition), {
		template: 'two-arm-trial',
		code: 'AMR-01',
		name: 'Aldermere',
		masked: true,
		training: false,
		sites: aldermereSites.map(({ name, zone, rooms }) => ({ name, zone, rooms: [...rooms] })),
		consentApprovedOn: addDays(begun, -30),
		plannedSubjects: 240
	});
	const { studyId } = await createStudyFrom(manager, definition, { training: false });
	const sites = await readOwn(systemActor('demo'), (reader) =>
		reader.selectFrom('site').select('id').where('study_id', '=', studyId).orderBy('code').execute()
	);
	await grantAll(
		ids,
		studyId,
		sites.map((site) => site.id)
	);
	at(new Date(`${addDays(begun, -5)}T10:00:00Z`));
	await publishProtocol(manager, studyId, 1);
	for (const site of await findSiteViews(manager, studyId))
		await approveSite(manager, studyId, site.id, { approvedOn: addDays(begun, -30) }, site.version);
	await signPlan(await acting(id(ids, 'statistician')), studyId, plan);
	const independent = await acting(id(ids, 'independent'));
	const { jobRunId } = await askForList(independent, studyId);
	await work(sides, 'allocation-list', { studyId, askedBy: independent.personId, jobRunId });
	const cast = await castOf(ids, studyId, sides);
	await new Trial(cast, now, today).play(people, (share) =>
		tell(0.05 + 0.75 * share, 'Aldermere: enrolling, booking, measuring, chasing')
	);
	return studyId;
}

async function look(
	sides: Sides,
	actor: Actor,
	studyId: string,
	cutId: string,
	spec: Partial<LookSpec>
) {
	const asked = await requestLook(actor, studyId, { cutId, ...plan, ...spec });
	const queue = (spec.group ?? plan.group) === 'arms' ? 'by-arm-look' : 'look';
	await work(sides, queue, { lookId: asked.id, jobRunId: asked.jobRunId });
	return asked.id;
}

async function looks(
	ids: Record<string, string>,
	sides: Sides,
	studyId: string,
	today: PlainDate
): Promise<void> {
	const day = addDays(today, -9);
	at(new Date(`${day}T07:00:00Z`));
	const statistician = await acting(id(ids, 'statistician'));
	const cut = await freezeCut(statistician, studyId, {
		label: 'First look, half the information',
		cutOffAt: `${day}T06:00:00Z`
	});
	at(new Date(`${day}T09:30:00Z`));
	const pooled = await look(sides, statistician, studyId, cut.id, { group: 'none' });
	at(new Date(`${day}T13:00:00Z`));
	const independent = await acting(id(ids, 'independent'));
	const byArm = await look(sides, independent, studyId, cut.id, {});
	at(new Date(`${day}T14:00:00Z`));
	const open = await report(sides, statistician, studyId, pooled);
	const closed = await report(sides, independent, studyId, byArm);
	const board = [id(ids, 'board'), id(ids, 'board2')];
	at(new Date(`${addDays(day, 1)}T08:15:00Z`));
	const released = await releaseReport(statistician, studyId, open, { people: board });
	for (const { id: releaseId } of released.releases) await work(sides, 'release', { releaseId });
	const asked = await releaseReport(independent, studyId, closed, { people: board });
	at(new Date(`${addDays(day, 1)}T11:40:00Z`));
	const manager = await acting(id(ids, 'data'));
	for (const { id: releaseId } of asked.releases) {
		await approveRelease(manager, studyId, releaseId);
		await work(sides, 'closed-release', { releaseId });
	}
	at(new Date(`${addDays(day, 5)}T16:20:00Z`));
	const member = await acting(id(ids, 'board2'));
	await downloadCopy(member, studyId, closed);
	await recommend(member, studyId, {
		reportId: closed,
		advice: 'continue unchanged',
		reason:
			'No concern about safety; visits are kept well. The board meets again at three quarters of the information.',
		meetingOn: addDays(day, 5),
		attendees: 'Henrike Olausson (chair), Desmond Ake'
	});
}

async function report(
	sides: Sides,
	actor: Actor,
	studyId: string,
	lookId: string
): Promise<string> {
	const made = await makeReport(actor, studyId, lookId);
	const closed = roleAllowing(actor.grants, 'look.by-arm', { studyId }) !== null;
	await work(sides, closed ? 'closed-report' : 'report', {
		reportId: made.id,
		jobRunId: made.jobRunId
	});
	return made.id;
}

/** The cohort, brought in as the file of an existing study, frozen and looked at by sex. */
async function cohort(ids: Record<string, string>, sides: Sides, today: PlainDate): Promise<void> {
	at(new Date(`${addDays(today, -41)}T08:30:00Z`));
	const manager = await acting(id(ids, 'data'));
	const { studyId } = await createStudy(manager, {
		template: 'imported-data',
		code: 'LGC-2',
		name: 'Larkfield',
		masked: false,
		training: false,
		sites: [{ name: 'Larkfield', zone: 'Europe/Dublin' }],
		plannedSubjects: 180
	});
	const administrator = await acting(id(ids, 'admin'));
	const deputy = await acting(id(ids, 'deputy'));
	await give(administrator, deputy, id(ids, 'statistician'), 'statistician', studyId);
	await give(administrator, deputy, id(ids, 'auditor'), 'auditor', studyId);
	const file = Buffer.from(larkfieldFile(addDays(today, -60)));
	const uploaded = await uploadImport(manager, studyId, { name: 'larkfield.csv', bytes: file });
	await mapImport(manager, studyId, uploaded.id, uploaded.version, {
		subject: 'child',
		site: { kind: 'site', code: '01' },
		time: { kind: 'date', column: 'date', anchor: { kind: 'first-date' } },
		visit: 'visit',
		characteristic: { column: 'sex', name: 'Sex' },
		covariates: [],
		measures: [
			{ column: 'height_cm', name: 'Standing height', unit: 'cm', decimals: 1 },
			{ column: 'weight_kg', name: 'Weight', unit: 'kg', decimals: 1 }
		],
		decimalSign: '.',
		missing: []
	});
	for (const dryRun of [true, false]) {
		const begun = await startImport(manager, studyId, uploaded.id, { dryRun });
		await work(sides, 'import', { batchId: uploaded.id, jobRunId: begun.jobRunId, dryRun });
	}
	at(new Date(`${addDays(today, -40)}T09:00:00Z`));
	const statistician = await acting(id(ids, 'statistician'));
	const cut = await freezeCut(statistician, studyId, {
		label: 'First five half-years',
		cutOffAt: ''
	});
	await look(sides, statistician, studyId, cut.id, {
		measure: 'standing-height',
		group: 'characteristic:sex',
		covariates: []
	});
}

/** Makes the whole demo at the present day. The caller has set the database to let its clock be moved. */
export async function makeDemo(sides: Sides, tell: Tell): Promise<DemoAccount[]> {
	clock.reset();
	const now = clock.now();
	const today = plainDateOf(now.toISOString().slice(0, 10));
	takeStage();
	tell(0.01, 'Inviting the people of the demo');
	at(new Date(`${addDays(today, -470)}T08:00:00Z`));
	const ids = await people();
	const administrator = await acting(id(ids, 'admin'));
	const deputy = await acting(id(ids, 'deputy'));
	await give(administrator, deputy, id(ids, 'deputy'), 'administrator');
	await give(administrator, deputy, id(ids, 'data'), 'data_manager');
	tell(0.04, 'Setting Aldermere up');
	const studyId = await trial(ids, sides, now, today, tell);
	tell(0.82, 'Freezing the data and looking');
	await looks(ids, sides, studyId, today);
	tell(0.9, 'Larkfield: importing, freezing, looking');
	await cohort(ids, sides, today);
	tell(0.95, 'Posting the mail');
	await postMail();
	leaveStage();
	return accounts();
}

function accounts(): DemoAccount[] {
	const account = (role: string, name: string, note: string): DemoAccount => ({
		role,
		email: address(name),
		password: demoPassword,
		note
	});
	return [
		account('administrator', 'admin', 'accounts and jobs, no study data'),
		account('data manager', 'data', 'both studies: schedule, import, data cuts'),
		account(
			'study coordinator',
			'coordinator',
			'Aldermere at Saltreach: windows, bookings, the chase'
		),
		account('research nurse', 'nurse', 'Aldermere at Saltreach: today’s visits and their forms'),
		account('site investigator', 'investigator', 'Aldermere at Saltreach'),
		account(
			'site pharmacist',
			'pharmacist',
			'Aldermere at Saltreach: the value that could reveal the arm'
		),
		account('monitor', 'monitor', 'Aldermere at Saltreach and Tarnbeck, reading only'),
		account('auditor', 'auditor', 'everything but allocation, reading only'),
		account('trial statistician', 'statistician', 'data cuts and pooled looks'),
		account('independent statistician', 'independent', 'looks by arm, closed reports'),
		account('monitoring board member', 'board', 'what was released to the board')
	];
}
