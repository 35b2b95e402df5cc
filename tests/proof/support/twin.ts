import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import pg from 'pg';
import { vi } from 'vitest';
import { root } from '../../../scripts/lib/places.mjs';
import { testBuild } from '../../../scripts/lib/test-cluster.mjs';
import { recommend } from '../../../src/lib/domain/board/board.server';
import { freezeCut } from '../../../src/lib/domain/cut/cut.commands.server';
import { makeFeed } from '../../../src/lib/domain/feed/feed.commands.server';
import { requestLook } from '../../../src/lib/domain/look/look.commands.server';
import type { LookSpec } from '../../../src/lib/domain/look/look.input';
import { signPlan } from '../../../src/lib/domain/look/plan.server';
import { approveSites } from '../../support/approve';
import { recordMeasurement } from '../../../src/lib/domain/measurement/measurement.commands.server';
import { recordMeasurementInput } from '../../../src/lib/domain/measurement/measurement.input';
import type { Role } from '../../../src/lib/domain/person/roles';
import {
	askForList,
	makeAllocationList
} from '../../../src/lib/domain/randomisation/allocation.commands.server';
import {
	approveRelease,
	makeReport,
	releaseReport
} from '../../../src/lib/domain/report/report.commands.server';
import { downloadCopy } from '../../../src/lib/domain/report/report-file.server';
import type { StudyDefinition } from '../../../src/lib/domain/study/definition';
import {
	createStudyFrom,
	publishProtocol
} from '../../../src/lib/domain/study/study.commands.server';
import { sign } from '../../../src/lib/domain/signature/signature.commands.server';
import { findWaiting } from '../../../src/lib/domain/signature/signature.reads.server';
import { recordExit } from '../../../src/lib/domain/subject/exit.commands.server';
import {
	addScreening,
	answerEligibility,
	closeScreening
} from '../../../src/lib/domain/subject/screening.commands.server';
import { recordConsent } from '../../../src/lib/domain/consent/consent.commands.server';
import {
	enrolSubject,
	randomiseSubject
} from '../../../src/lib/domain/subject/subject.commands.server';
import {
	bookVisit,
	cancelAppointment,
	moveAppointment
} from '../../../src/lib/domain/visit/booking.commands.server';
import { declareMissed, logContact } from '../../../src/lib/domain/visit/chase.commands.server';
import { finishVisit, startVisit } from '../../../src/lib/domain/visit/conduct.commands.server';
import {
	loseKit,
	planKits,
	receiveKits,
	sendKits,
	setKitLevel
} from '../../../src/lib/domain/kit/kit.commands.server';
import { getKitStock } from '../../../src/lib/domain/kit/kit.reads.server';
import { correctStratum } from '../../../src/lib/domain/randomisation/stratum.commands.server';
import { askForCodes, sealedCodesJob } from '../../../src/lib/domain/unmasking/codes.server';
import {
	recordUnmasking,
	unmaskSubject
} from '../../../src/lib/domain/unmasking/unmasking.commands.server';
import { ids, newId, tokens } from '../../../src/lib/id';
import type { Actor } from '../../../src/lib/server/actor';
import { actorFor } from '../../../src/lib/server/auth/actor';
import { startSession } from '../../../src/lib/server/auth/session';
import { closedConfig, config, readClosedConfig, readConfig } from '../../../src/lib/server/config';
import { byArmLookJob, lookJob } from '../../../src/lib/server/looks/jobs';
import {
	closedReleaseJob,
	closedReportJob,
	releaseJob,
	reportJob
} from '../../../src/lib/server/looks/report-jobs';
import { forgetStorage } from '../../../src/lib/server/storage/storage';
import { clock } from '../../../src/lib/time/clock';
import { addDays, isoWeekday, plainDateOf, type PlainDate } from '../../../src/lib/time/dates';
import { checkFile, orthodontMapping } from '../../support/analysis';
import { useEnvironment, type FreshDatabase } from '../../support/database';
import { keepScan } from '../../../src/lib/domain/upload/upload.commands.server';
import { smallPdf } from '../../support/files';
import { useAs } from '../../support/scene';
import { withTellingMeasure } from '../../support/telling';

export interface TwinPerson {
	name: string;
	role: Role;
	email: string;
	actor: Actor;
}

export interface Twin {
	studyId: string;
	/** A study that minimises and keeps a stock, with subjects randomised from it. */
	minimisedStudyId: string;
	people: Record<string, TwinPerson>;
	feedTokens: string[];
	openReportId: string;
	byArmLookId: string;
}

interface Told {
	/** Whether each place of the list has the other arm than in the twin. */
	swapped: boolean;
	passwordHash: string;
	/** What the hash is of: signing asks for it. */
	password: string;
	/** The day on which the study begins; everything is counted from it. */
	begin: PlainDate;
}

/** Who belongs to the study: the name, the role, and the site (0 or 1) where it is a site's. */
const cast: [name: string, role: Role, site?: 0 | 1][] = [
	['coordinator', 'coordinator', 0],
	['nurse', 'nurse', 0],
	['investigator', 'investigator', 0],
	['pharmacist', 'pharmacist', 0],
	['monitor', 'monitor', 0],
	['coordinator elsewhere', 'coordinator', 1],
	['nurse elsewhere', 'nurse', 1],
	['pharmacist elsewhere', 'pharmacist', 1],
	['auditor', 'auditor'],
	['statistician', 'statistician'],
	['independent statistician', 'independent_statistician'],
	['board member', 'board_member'],
	['unmasked board member', 'board_member']
];

function definitionFrom(begin: PlainDate): StudyDefinition {
	const file = join(root, 'templates/studies/two-arm-trial.json');
	const { $schema, ...definition } = JSON.parse(readFileSync(file, 'utf8'));
	void $schema;
	const told = withTellingMeasure(definition as StudyDefinition);
	return {
		...told,
		schedule: {
			...told.schedule,
			baseline: [...(told.schedule.baseline ?? []), 'urine-glucose', 'urine-glucose-mean']
		},
		code: 'TWIN-1',
		name: 'Twin threads',
		plannedSubjects: 40,
		// Somebody signs one checklist below; who is enrolled before that need not wait for it.
		eligibilitySigned: false,
		consentVersions: [{ ...definition.consentVersions[0], from: addDays(begin, -60) }]
	} as StudyDefinition;
}

const model: LookSpec = {
	measure: 'creatinine',
	timeUnit: 'month',
	group: 'none',
	covariates: [],
	ownLevel: 'yes',
	method: 'REML',
	df: 'kenward-roger'
};

/** Commands speak to this database and its files, with ids, tokens and the clock as told. */
function enterDatabase(db: FreshDatabase): void {
	useEnvironment(db, {
		CLI_DIR: join(root, testBuild.buildDir, 'cli'),
		MAIL_FROM: 'Heddle <heddle@heddle.test>'
	});
	Object.assign(config(), readConfig(process.env));
	Object.assign(closedConfig(), readClosedConfig(process.env));
	forgetStorage();
}

/** Closes what is open just now. */
let end: () => Promise<void>;

/** One study played from its beginning to a released report, by the application's own commands. */
export async function playTwin(db: FreshDatabase, told: Told): Promise<Twin> {
	enterDatabase(db);
	await db.sql('update app.installation set clock_may_move = true');
	clock.set(`${told.begin}T10:00:00Z`);
	ids.seed(1848);
	tokens.seedForTests(1848);
	// How often a job writes its progress down hangs on how long it takes: here it takes no time.
	const still = vi.spyOn(performance, 'now').mockReturnValue(1_000_000);
	end = useAs(db.appUrl);
	try {
		return await play(db, told);
	} finally {
		await end();
		still.mockRestore();
		ids.reset();
		tokens.reset();
		clock.reset();
		await db.sql('update app.installation set clock_may_move = false');
	}
}

const system = '00000000-0000-7000-8000-000000000001';

/** An account with its role from the first day on, at the told time of the clock. */
async function addMember(
	db: FreshDatabase,
	person: { name: string; email: string; passwordHash: string; role: Role },
	place: [studyId: string | null, siteId: string | null]
): Promise<string> {
	const id = newId();
	const second = newId();
	const closedSide = ['independent_statistician', 'board_member'].includes(person.role);
	const client = new pg.Client({ connectionString: db.ownerUrl });
	await client.connect();
	try {
		await client.query('begin');
		await client.query(`select app.enter($1, 'system', 'twin', '', $2)`, [
			system,
			clock.now().toISOString()
		]);
		const add = 'insert into app.person (id, email, name, password_hash) values ($1, $2, $3, $4)';
		await client.query(add, [id, person.email, person.name, person.passwordHash]);
		if (closedSide)
			await client.query(add, [second, `${second}@example.org`, 'Second Person', null]);
		await client.query(
			`insert into app.person_role (id, person_id, role, study_id, site_id, valid_from, granted_by, confirmed_by, confirmed_at)
			values ($1, $2, $3, $4, $5, '2020-01-01', $6, $7, case when $7::uuid is null then null else app.now() end)`,
			[newId(), id, person.role, ...place, system, closedSide ? second : null]
		);
		await client.query('commit');
		return id;
	} finally {
		await client.end();
	}
}

/** As the look worker, under its own role; then as the web server again. */
async function unmasked(db: FreshDatabase, work: () => Promise<void>): Promise<void> {
	await end();
	end = useAs(db.unmaskedUrl);
	await work();
	await end();
	end = useAs(db.appUrl);
}

async function play(
	db: FreshDatabase,
	{ swapped, passwordHash, password, begin }: Told
): Promise<Twin> {
	const day = (n: number) => addDays(begin, n);
	const goTo = (n: number) => clock.set(`${day(n)}T10:00:00Z`);
	const people: Record<string, TwinPerson> = {};
	const person = async (
		name: string,
		role: Role,
		studyId: string | null,
		siteId: string | null = null
	) => {
		const email = `${name.replaceAll(' ', '.')}@example.org`;
		const id = await addMember(db, { name: `Twin ${name}`, email, passwordHash, role }, [
			studyId,
			siteId
		]);
		people[name] = { name, role, email, actor: await actorFor(id, 'twin') };
	};
	const as = (name: string): Actor => (people[name] as TwinPerson).actor;
	await person('administrator', 'administrator', null);
	await person('data manager', 'data_manager', null);
	const manager = as('data manager');
	const definition = definitionFrom(begin);
	const { studyId } = await createStudyFrom(manager, definition, { training: false });
	await publishProtocol(manager, studyId, 1);
	await approveSites(manager, studyId);
	const [sites = [], rooms = [], consents = [], measures = []] = await db.sql(
		`select id from app.site where study_id = '${studyId}' order by code`,
		`select r.id from app.room r join app.site s on s.id = r.site_id where r.study_id = '${studyId}' order by s.code, r.name`,
		`select id from app.consent_version where study_id = '${studyId}'`,
		`select id, key from app.measure where study_id = '${studyId}'`
	);
	for (const [name, role, site] of cast)
		await person(name, role, studyId, site === undefined ? null : (sites[site].id as string));
	const measureId = Object.fromEntries(measures.map((row) => [row.key, row.id as string]));

	const { jobRunId } = await askForList(as('independent statistician'), studyId);
	await unmasked(db, () =>
		makeAllocationList({
			payload: { studyId, askedBy: as('independent statistician').personId, jobRunId },
			lastTry: true
		})
	);
	// The one thing in which the twins differ. The trail is left out of it, as it would be if the list had come so.
	const swapArms = async (study: string) => {
		if (!swapped) return;
		await db.sql(
			`set session_replication_role = replica`,
			`update closed.list_position set arm_key = case arm_key when 'a' then 'b' else 'a' end where study_id = '${study}'`,
			`update closed.minimisation set arms = jsonb_build_array(arms -> 1, arms -> 0) where study_id = '${study}'`
		);
	};
	await swapArms(studyId);
	await signPlan(as('statistician'), studyId, { ...model, group: 'arms' });
	await stockSites(as, studyId, sites);
	const second = await playMinimised(db, { person, as, swapArms, begin });

	// Ten people enter, eight at the first site and two at the second; one more was considered and one is in hand.
	const answers = Object.fromEntries(
		definition.eligibility.map((each) => [each.key, each.kind === 'inclusion' ? 'yes' : 'no'])
	) as Record<string, 'yes' | 'no'>;
	const here = (n: number) => (n < 8 ? 0 : 1);
	const coordinatorOf = (n: number) => as(here(n) === 0 ? 'coordinator' : 'coordinator elsewhere');
	const nurseOf = (n: number) => as(here(n) === 0 ? 'nurse' : 'nurse elsewhere');
	const subjects: string[] = [];
	const enrolledOn = (n: number) => n;
	for (let n = 0; n < 10; n++) {
		goTo(enrolledOn(n));
		const by = coordinatorOf(n);
		const siteId = sites[here(n)].id as string;
		const screening = await addScreening(by, studyId, { siteId, screenedOn: day(n) });
		const consent = await recordConsent(by, studyId, screening.id, {
			consentVersionId: consents[0].id,
			signedOn: day(n),
			signedTime: '04:30',
			obtainedOn: day(n),
			obtainedTime: '04:30',
			relationship: '',
			witnessed: false,
			minor: false,
			assent: '' as const,
			assentReason: '',
			explainedBy: by.personId,
			signedBy: 'participant',
			copyGiven: true
		});
		if (n === 0)
			await keepScan(by, studyId, consent.id, {
				bytes: smallPdf,
				name: 'form.pdf',
				type: 'application/pdf',
				reason: ''
			});
		const { version } = await answerEligibility(
			by,
			studyId,
			screening.id,
			{ answers },
			screening.version
		);
		const subject = await enrolSubject(
			by,
			studyId,
			screening.id,
			{
				enrolledOn: day(n),
				stratum: { 'kidney-function': n % 2 ? 'below-45' : 'from-45' },
				characteristics: { sex: n % 3 ? 'female' : 'male', 'birth-date': `19${60 + n}-04-30` },
				contact: {
					name: `Person ${n}`,
					email: `person-${n}@example.org`,
					phone: '',
					language: n % 2 ? 'en' : 'de'
				}
			},
			version
		);
		subjects.push(subject.id);
		await randomiseSubject(by, studyId, subject.id);
	}
	const out = await addScreening(as('coordinator'), studyId, {
		siteId: sites[0].id,
		screenedOn: day(9)
	});
	await closeScreening(as('coordinator'), studyId, out.id, 'Lives too far away.', out.version);
	const later = await addScreening(as('coordinator'), studyId, {
		siteId: sites[0].id,
		screenedOn: day(9)
	});
	await answerEligibility(as('coordinator'), studyId, later.id, { answers }, later.version);
	const investigator = people.investigator as TwinPerson;
	const signer = {
		...investigator.actor,
		sessionId: await startSession(
			{ id: investigator.actor.personId, name: investigator.name, email: investigator.email },
			'password',
			'twin',
			'twin'
		)
	};
	const { items } = await findWaiting(signer, studyId);
	await sign(signer, studyId, {
		items: items.map(({ record, recordId, meaning, sha256 }) => ({
			record,
			recordId,
			meaning,
			sha256
		})),
		email: investigator.email,
		password
	});

	await playUnmasking(db, { as, signer, studyId, sites, subjects, password });

	const visitOf = async (subjectId: string, key: string) =>
		(
			await db.sql(
				`select v.id, v.version, v.target::text as target, v.latest::text as latest from app.visit v join app.planned_visit p on p.id = v.planned_visit_id
				where v.subject_id = '${subjectId}' and p.key = '${key}'`
			)
		)[0]?.[0] as { id: string; version: number; target: string; latest: string };
	/** One visit from its beginning to its end; the values are the subject's and the day's, whatever its arm. */
	async function measure(n: number, key: string, on: number, slope: number): Promise<void> {
		goTo(on);
		const nurse = nurseOf(n);
		const visit = await visitOf(subjects[n] as string, key);
		const { version } = await startVisit(nurse, studyId, visit.id, visit.version);
		const keep = (of: string, entry: unknown) =>
			recordMeasurement(
				nurse,
				studyId,
				visit.id,
				measureId[of] as string,
				null,
				recordMeasurementInput.parse({ entry })
			);
		const value = (number: number) => ({ kind: 'value', value: String(Math.round(number)) });
		const readings = (first: number) => ({
			kind: 'readings',
			values: [first, first + 3, first + 1].map(String)
		});
		await keep('creatinine', value(90 + n * 7 + slope * on + ((n * 31 + on * 17) % 11)));
		await keep('systolic', readings(120 + n));
		await keep('diastolic', readings(75 + n));
		if (definition.schedule[key]?.includes('weight'))
			await keep(
				'weight',
				n % 4 ? value(70 + n) : { kind: 'not done', reason: 'Subject declined' }
			);
		await keep('potassium', { kind: 'value', value: '4.4' });
		await finishVisit(nurse, studyId, visit.id, version);
		if (definition.schedule[key]?.includes('urine-glucose')) await tell(n, visit.id);
	}
	/** What differs with the arm and only the pharmacist sees; changed once, so that the trail tells of it twice. */
	async function tell(n: number, visitId: string): Promise<void> {
		const [rows = []] = await db.sql(
			`select arm_key from closed.list_position where subject_id = '${subjects[n]}'`
		);
		const level = rows[0]?.arm_key === 'b' ? 41 + n : 0.5;
		const keep = (value: number, version: number | null) =>
			recordMeasurement(
				as(here(n) === 0 ? 'pharmacist' : 'pharmacist elsewhere'),
				studyId,
				visitId,
				measureId['urine-glucose'] as string,
				version,
				recordMeasurementInput.parse({
					entry: { kind: 'value', value: value.toFixed(2) },
					reason: version ? 'Read again.' : ''
				})
			);
		const { version } = await keep(level, null);
		await keep(level + 0.25, version);
	}
	for (let n = 0; n < 10; n++) await measure(n, 'baseline', 10, 0);
	for (let n = 0; n < 9; n++) await measure(n, 'week-2', 20 + n, 0.05);
	// The tenth does not come: somebody tries to reach them, and the visit is given up.
	goTo(40);
	const missed = await visitOf(subjects[9] as string, 'week-2');
	await logContact(as('coordinator elsewhere'), studyId, missed.id, {
		way: 'telephone',
		outcome: 'no answer',
		nextStep: 'Write a letter.',
		tryAgainOn: day(45)
	});
	await declareMissed(as('coordinator elsewhere'), studyId, missed.id, missed.version, {
		reason: 'Could not be reached.'
	});
	for (let n = 0; n < 8; n++) await measure(n, 'month-1', 33 + n, 0.1);
	goTo(60);
	await recordExit(as('coordinator'), studyId, subjects[1] as string, {
		kind: 'consent withdrawn',
		happenedOn: day(60),
		reason: ''
	});
	await recordExit(as('investigator'), studyId, subjects[2] as string, {
		kind: 'intervention discontinued',
		happenedOn: day(59),
		reason: 'A side effect.'
	});
	for (let n = 3; n < 6; n++) await measure(n, 'month-3', 90 + n, 0.12);

	// Bookings: one stands, one is moved, one is cancelled.
	goTo(100);
	const openDay = (from: string): PlainDate => {
		let on = plainDateOf(from);
		while (isoWeekday(on) > 5) on = addDays(on, 1);
		return on;
	};
	const place = (on: PlainDate, time: string) => ({
		date: on,
		time,
		roomId: rooms[0].id as string,
		staffId: as('nurse').personId,
		outsideReason: ''
	});
	for (const [at, n] of [3, 4, 5].entries()) {
		const visit = await visitOf(subjects[n] as string, 'month-6');
		const on = openDay(visit.target);
		const made = await bookVisit(
			as('coordinator'),
			studyId,
			visit.id,
			visit.version,
			place(on, '09:00')
		);
		if (at === 1)
			await moveAppointment(
				as('coordinator'),
				studyId,
				visit.id,
				made.version,
				place(openDay(addDays(on, 1)), '10:00')
			);
		if (at === 2)
			await cancelAppointment(as('coordinator'), studyId, visit.id, made.version, {
				reason: 'The subject called.'
			});
	}
	const feedTokens: string[] = [];
	for (const name of ['coordinator', 'nurse', 'investigator'])
		feedTokens.push((await makeFeed(as(name), studyId, { siteId: sites[0].id })).token);
	const { characteristic, visit, ...mapping } = orthodontMapping;
	void characteristic;
	void visit;
	const batch = await checkFile(
		{ manager, studyId },
		'subject,time,distance\nA,0,twenty\n',
		mapping
	);
	if (!batch.summary?.problemCount) throw new Error('The file was to have a problem');

	// A cut, a pooled look with its report, and the same by arm on the closed side.
	goTo(110);
	const statistician = as('statistician');
	const independent = as('independent statistician');
	const cut = await freezeCut(statistician, studyId, { label: 'First', cutOffAt: '' });
	const pooled = await requestLook(statistician, studyId, { cutId: cut.id, ...model });
	await lookJob({ payload: { lookId: pooled.id, jobRunId: pooled.jobRunId }, lastTry: true });
	const bySex = await requestLook(statistician, studyId, {
		cutId: cut.id,
		...model,
		group: 'characteristic:sex'
	});
	await lookJob({ payload: { lookId: bySex.id, jobRunId: bySex.jobRunId }, lastTry: true });
	const report = await makeReport(statistician, studyId, pooled.id);
	await reportJob({ payload: { reportId: report.id, jobRunId: report.jobRunId }, lastTry: true });
	const members = ['board member', 'unmasked board member'].map((name) => as(name).personId);
	const released = await releaseReport(statistician, studyId, report.id, { people: members });
	for (const { id } of released.releases)
		await releaseJob({ payload: { releaseId: id }, lastTry: true });
	const byArm = await requestLook(independent, studyId, { cutId: cut.id, ...model, group: 'arms' });
	await unmasked(db, () =>
		byArmLookJob({ payload: { lookId: byArm.id, jobRunId: byArm.jobRunId }, lastTry: true })
	);
	const closed = await makeReport(independent, studyId, byArm.id);
	await unmasked(db, () =>
		closedReportJob({ payload: { reportId: closed.id, jobRunId: closed.jobRunId }, lastTry: true })
	);
	const asked = await releaseReport(independent, studyId, closed.id, {
		people: [as('unmasked board member').personId]
	});
	for (const { id } of asked.releases) {
		await approveRelease(manager, studyId, id);
		await unmasked(db, () => closedReleaseJob({ payload: { releaseId: id }, lastTry: true }));
	}
	await downloadCopy(as('board member'), studyId, report.id);
	await downloadCopy(as('unmasked board member'), studyId, closed.id);
	await recommend(as('unmasked board member'), studyId, {
		reportId: report.id,
		advice: 'continue unchanged',
		reason: 'Nothing speaks against it.',
		meetingOn: day(110),
		attendees: 'All members'
	});
	return {
		studyId,
		minimisedStudyId: second,
		people,
		feedTokens,
		openReportId: report.id,
		byArmLookId: byArm.id
	};
}

type Acting = (name: string) => Actor;

/** Kits for both sites: full, received, one of them damaged. */
async function stockSites(as: Acting, studyId: string, sites: { id: string }[]): Promise<void> {
	const manager = as('data manager');
	await planKits(manager, studyId, { useDays: 20 });
	for (const [at, site] of sites.entries()) {
		await setKitLevel(manager, studyId, {
			siteId: site.id,
			fullStock: 20,
			resupplyAt: 14,
			version: 0
		});
		const { id } = await sendKits(manager, studyId, { siteId: site.id, expiresOn: '2099-01-31' });
		const keeper = as(at === 0 ? 'coordinator' : 'coordinator elsewhere');
		await receiveKits(keeper, studyId, id);
		if (at > 0) continue;
		const stock = await getKitStock(keeper, studyId);
		await loseKit(keeper, studyId, {
			kitNumber: stock.deliveries[0]?.numbers[3] ?? '',
			status: 'damaged',
			note: 'Fell from the shelf.'
		});
	}
}

/** A second study of the same people, by minimisation, from stock, until the site may give no more. */
async function playMinimised(
	db: FreshDatabase,
	{
		person,
		as,
		swapArms,
		begin
	}: {
		person: (name: string, role: Role, studyId: string, siteId?: string | null) => Promise<void>;
		as: Acting;
		swapArms: (studyId: string) => Promise<void>;
		begin: PlainDate;
	}
): Promise<string> {
	const manager = as('data manager');
	const definition: StudyDefinition = {
		...definitionFrom(begin),
		code: 'TWIN-2',
		name: 'Twin threads, minimised',
		allocation: { method: 'minimisation' }
	};
	const { studyId } = await createStudyFrom(manager, definition, { training: false });
	await publishProtocol(manager, studyId, 1);
	await approveSites(manager, studyId);
	const [sites = [], consents = []] = await db.sql(
		`select id from app.site where study_id = '${studyId}' order by code`,
		`select id from app.consent_version where study_id = '${studyId}'`
	);
	await person('second coordinator', 'coordinator', studyId, sites[0].id as string);
	await person('second independent statistician', 'independent_statistician', studyId);
	const independent = as('second independent statistician');
	const { jobRunId } = await askForList(independent, studyId, { bestChance: 0.75 });
	await unmasked(db, () =>
		makeAllocationList({
			payload: { studyId, askedBy: independent.personId, jobRunId },
			lastTry: true
		})
	);
	await swapArms(studyId);
	await planKits(manager, studyId, { useDays: 20 });
	await setKitLevel(manager, studyId, {
		siteId: sites[0].id,
		fullStock: 8,
		resupplyAt: 6,
		version: 0
	});
	const { id } = await sendKits(manager, studyId, { siteId: sites[0].id, expiresOn: '2099-01-31' });
	const by = as('second coordinator');
	await receiveKits(by, studyId, id);
	const answers = Object.fromEntries(
		definition.eligibility.map((each) => [each.key, each.kind === 'inclusion' ? 'yes' : 'no'])
	) as Record<string, 'yes' | 'no'>;
	// Four may be given of the eight; the fifth is refused, whichever arm it would have been.
	for (let n = 0; n < 5; n++) {
		const screening = await addScreening(by, studyId, { siteId: sites[0].id, screenedOn: begin });
		await recordConsent(by, studyId, screening.id, {
			consentVersionId: consents[0].id,
			signedOn: begin,
			signedTime: '04:30',
			obtainedOn: begin,
			obtainedTime: '04:30',
			relationship: '',
			witnessed: false,
			minor: false,
			assent: '',
			assentReason: '',
			explainedBy: by.personId,
			signedBy: 'participant',
			copyGiven: true
		});
		const { version } = await answerEligibility(
			by,
			studyId,
			screening.id,
			{ answers },
			screening.version
		);
		const subject = await enrolSubject(
			by,
			studyId,
			screening.id,
			{
				enrolledOn: begin,
				stratum: { 'kidney-function': n % 2 ? 'below-45' : 'from-45' },
				characteristics: { sex: n % 2 ? 'female' : 'male', 'birth-date': `19${60 + n}-04-30` },
				contact: null
			},
			version
		);
		const given = await randomiseSubject(by, studyId, subject.id).catch(
			(refusal: { code: string }) => refusal.code
		);
		if ((typeof given === 'string') !== (n === 4)) throw new Error(`Not as planned: ${n} ${given}`);
	}
	return studyId;
}

/** One subject is unmasked, sheets of codes are made for the site, and an accident is written down. */
async function playUnmasking(
	db: FreshDatabase,
	{
		as,
		signer,
		studyId,
		sites,
		subjects,
		password
	}: {
		as: Acting;
		signer: Actor;
		studyId: string;
		sites: { id: string }[];
		subjects: string[];
		password: string;
	}
): Promise<void> {
	await unmaskSubject(signer, studyId, subjects[0] as string, {
		reason: 'Unconscious, cause unknown.',
		email: signer.email,
		password
	});
	await recordUnmasking(as('coordinator'), studyId, subjects[2] as string, {
		kind: 'accidental',
		code: '',
		knownTo: 'The ward',
		happenedOn: plainDateOf(clock.now().toISOString().slice(0, 10)),
		happenedTime: '00:10',
		reason: 'A delivery note lay open.',
		impact: ''
	});
	await correctStratum(
		as('coordinator'),
		studyId,
		subjects[4] as string,
		{ stratum: { 'kidney-function': 'below-45' }, reason: 'Read from another report.' },
		(await db.sql(`select version from app.subject where id = '${subjects[4]}'`))[0]?.[0].version
	);
	const print = await askForCodes(as('independent statistician'), studyId, sites[0]!.id);
	await unmasked(db, () =>
		sealedCodesJob({ payload: { printId: print.id, jobRunId: print.jobRunId }, lastTry: true })
	);
}
