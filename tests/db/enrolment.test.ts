import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { recordExit } from '../../src/lib/domain/subject/exit.commands.server';
import { readSubjectNumber } from '../../src/lib/domain/subject/number';
import {
	addScreening,
	answerEligibility,
	closeScreening
} from '../../src/lib/domain/subject/screening.commands.server';
import { recordConsent } from '../../src/lib/domain/consent/consent.commands.server';
import {
	enrolSubject,
	randomiseSubject,
	saveContactDetails
} from '../../src/lib/domain/subject/subject.commands.server';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import {
	consentOn,
	enrolOne,
	makeList,
	makeScene,
	metAnswers,
	particulars,
	useAs,
	type Scene
} from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;
const site = () => scene.sites[0]?.id as string;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	await db.sql('update app.installation set clock_may_move = true');
	clock.set('2026-03-10T12:00:00Z');
	scene = await makeScene(db);
});
afterAll(async () => {
	clock.reset();
	await end?.();
	await db?.drop();
});

const screened = (on = '2026-03-02') =>
	addScreening(scene.coordinator, scene.studyId, { siteId: site(), screenedOn: on });

describe('the screening log', () => {
	test('numbers the people considered at a site, one number each', async () => {
		const before = await screened();
		const together = await Promise.all(Array.from({ length: 8 }, () => screened()));
		const numbers = together.map((each) => each.number).sort((a, b) => a - b);
		expect(numbers).toEqual(Array.from({ length: 8 }, (_, at) => before.number + 1 + at));
	});

	test('takes no day that has not come, by the site’s own calendar', async () => {
		await expect(screened('2026-03-11')).rejects.toMatchObject({ code: 'FUTURE' });
		const there = scene.sites[1]?.id as string;
		clock.set('2026-03-10T03:00:00Z');
		await expect(
			addScreening(scene.other, scene.studyId, { siteId: there, screenedOn: '2026-03-10' })
		).rejects.toMatchObject({ code: 'FUTURE' });
		clock.set('2026-03-10T12:00:00Z');
	});

	test('keeps why somebody was not entered, and is then closed', async () => {
		const { id, version } = await screened();
		const closed = await closeScreening(
			scene.coordinator,
			scene.studyId,
			id,
			'Moved away.',
			version
		);
		await expect(
			answerEligibility(scene.coordinator, scene.studyId, id, { answers: {} }, closed.version)
		).rejects.toMatchObject({ code: 'CONFLICT' });
	});

	test('is not another site’s to write in, nor is it found there', async () => {
		const { id } = await screened();
		await expect(
			addScreening(scene.other, scene.studyId, { siteId: site(), screenedOn: '2026-03-02' })
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		await expect(
			recordConsent(scene.other, scene.studyId, id, consentOn(scene, scene.other, '2026-03-02'))
		).rejects.toMatchObject({ code: 'NOT_FOUND' });
	});
});

describe('consent', () => {
	const record = async (change: Partial<ReturnType<typeof consentOn>>) => {
		const { id } = await screened();
		return recordConsent(scene.coordinator, scene.studyId, id, {
			...consentOn(scene, scene.coordinator, '2026-03-02'),
			...change
		});
	};

	test('is not recorded before it is signed', async () => {
		await expect(record({ signedOn: '2026-03-10', signedTime: '12:01' })).rejects.toMatchObject({
			code: 'FUTURE'
		});
		await record({ signedOn: '2026-03-10', signedTime: '11:59' });
	});

	test('is not older than the approval of its version', async () => {
		await expect(record({ signedOn: '2025-01-05' })).rejects.toMatchObject({
			code: 'CONSENT_EARLY'
		});
		await record({ signedOn: '2025-01-06' });
	});

	test('is explained by somebody who had a role at the site on that day', async () => {
		await expect(record({ explainedBy: scene.other.personId })).rejects.toMatchObject({
			fields: { explainedBy: expect.any(String) }
		});
		await record({ explainedBy: scene.nurse.personId });
	});

	test('is of a version of this study', async () => {
		const elsewhere = await makeScene(db);
		await expect(record({ consentVersionId: elsewhere.consentVersionId })).rejects.toMatchObject({
			fields: { consentVersionId: expect.any(String) }
		});
	});
});

describe('enrolment', () => {
	const ready = async (steps: {
		consent?: string | null;
		answers?: Record<string, 'yes' | 'no'>;
	}) => {
		const { id, version } = await screened();
		if (steps.consent !== null)
			await recordConsent(
				scene.coordinator,
				scene.studyId,
				id,
				consentOn(scene, scene.coordinator, steps.consent ?? '2026-03-02')
			);
		const answered = await answerEligibility(
			scene.coordinator,
			scene.studyId,
			id,
			{ answers: steps.answers ?? (await metAnswers(scene)) },
			version
		);
		return { id, version: answered.version };
	};
	const enrol = (id: string, version: number, change = {}) =>
		enrolSubject(
			scene.coordinator,
			scene.studyId,
			id,
			{ enrolledOn: '2026-03-02', ...particulars, ...change },
			version
		);

	test('needs a consent on or before the day', async () => {
		const none = await ready({ consent: null });
		await expect(enrol(none.id, none.version)).rejects.toMatchObject({ code: 'CONSENT_NEEDED' });
		const later = await ready({ consent: '2026-03-03' });
		await expect(enrol(later.id, later.version)).rejects.toMatchObject({ code: 'CONSENT_NEEDED' });
		await enrol(later.id, later.version, { enrolledOn: '2026-03-03' });
	});

	test('needs every criterion answered and met, each in turn', async () => {
		const met = await metAnswers(scene);
		for (const key of Object.keys(met)) {
			const unmet = await ready({ answers: { ...met, [key]: met[key] === 'yes' ? 'no' : 'yes' } });
			await expect(enrol(unmet.id, unmet.version)).rejects.toMatchObject({ code: 'NOT_ELIGIBLE' });
			const { [key]: _, ...rest } = met;
			const open = await ready({ answers: rest });
			await expect(enrol(open.id, open.version)).rejects.toMatchObject({ code: 'NOT_ELIGIBLE' });
		}
	});

	test('needs the strata and characteristics that the definition asks for, and no others', async () => {
		const { id, version } = await ready({});
		await expect(enrol(id, version, { stratum: {} })).rejects.toMatchObject({
			fields: { 'stratum.kidney-function': expect.any(String) }
		});
		await expect(
			enrol(id, version, {
				stratum: { 'kidney-function': 'below-45', arm: 'a' },
				characteristics: { sex: 'neither', 'birth-date': '2027-01' }
			})
		).rejects.toMatchObject({
			fields: {
				'stratum.arm': expect.any(String),
				'characteristics.sex': expect.any(String),
				'characteristics.birth-date': expect.any(String)
			}
		});
	});

	test('gives the site’s next number with a check digit, plans what is counted from enrolment, once', async () => {
		const { id, version } = await ready({});
		const made = await enrol(id, version, {
			contact: { name: 'Ada Reed', email: 'ada@example.org', phone: '', language: 'en' }
		});
		expect(readSubjectNumber(made.number).ok).toBe(true);
		const [visits, [contact] = [], [screening] = [], [consent] = [], [subject] = []] = await db.sql(
			`select name, earliest::text, target::text, latest::text, status from app.visit where subject_id = '${made.id}'`,
			`select name, email, phone from app.contact_details where subject_id = '${made.id}'`,
			`select outcome from app.screening where id = '${id}'`,
			`select subject_id from app.consent where screening_id = '${id}'`,
			`select stratum, characteristics from app.subject where id = '${made.id}'`
		);
		expect(visits).toEqual([
			{
				name: 'Baseline',
				earliest: '2026-03-02',
				target: '2026-03-02',
				latest: '2026-03-09',
				status: 'planned'
			}
		]);
		expect(contact).toEqual({ name: 'Ada Reed', email: 'ada@example.org', phone: null });
		expect(screening?.outcome).toBe('entered');
		expect(consent?.subject_id).toBe(made.id);
		expect(subject).toEqual({
			stratum: { 'kidney-function': 'below-45', site: '01' },
			characteristics: { sex: 'female', 'birth-date': '1961-04-30' }
		});
		await expect(enrol(id, version)).rejects.toMatchObject({ code: 'ALREADY_ENTERED' });
	});

	test('at the same moment gives different numbers, without a gap', async () => {
		const first = await enrolOne(scene);
		const running = (number: string) => Number(number.slice(3, 7));
		const all = await Promise.all(Array.from({ length: 6 }, () => enrolOne(scene)));
		const numbers = all.map((each) => running(each.number)).sort((a, b) => a - b);
		expect(numbers).toEqual(Array.from({ length: 6 }, (_, at) => running(first.number) + 1 + at));
	});

	test('is not possible before a protocol version is published', async () => {
		const { createStudy } = await import('../../src/lib/domain/study/study.commands.server');
		const { studyId } = await createStudy(scene.manager, {
			template: 'two-arm-trial',
			code: 'DRAFT-9',
			name: 'Still a draft',
			masked: true,
			training: false,
			sites: [{ name: 'Tarnbeck', zone: 'Europe/London' }]
		});
		const [[draftSite]] = (await db.sql(
			`select id from app.site where study_id = '${studyId}'`
		)) as [{ id: string }[]];
		const coordinator = {
			...scene.coordinator,
			grants: [{ role: 'coordinator' as const, studyId, siteId: null }]
		};
		await asOwner(db, (client) =>
			client.query(
				`insert into app.person_role (id, person_id, role, study_id, valid_from, granted_by)
				values (gen_random_uuid(), $1, 'coordinator', $2, '2020-01-01', '00000000-0000-7000-8000-000000000001')`,
				[scene.coordinator.personId, studyId]
			)
		);
		await expect(
			addScreening(coordinator, studyId, {
				siteId: draftSite?.id as string,
				screenedOn: '2026-03-02'
			})
		).rejects.toMatchObject({ code: 'NOT_PUBLISHED' });
	});
});

describe('contact details', () => {
	test('have a permission of their own and a version', async () => {
		const subject = await enrolOne(scene);
		const contact = {
			name: 'Ivo Marsh',
			email: '',
			phone: '+44 20 7946 0000',
			language: 'en' as const
		};
		await expect(
			saveContactDetails(scene.nurse, scene.studyId, subject.id, contact, 0)
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		await saveContactDetails(scene.coordinator, scene.studyId, subject.id, contact, 0);
		const changed = { ...contact, email: 'ivo@example.org' };
		await saveContactDetails(scene.coordinator, scene.studyId, subject.id, changed, 1);
		await expect(
			saveContactDetails(scene.coordinator, scene.studyId, subject.id, contact, 1)
		).rejects.toMatchObject({ code: 'STALE' });
		const [[kept] = [], events] = await db.sql(
			`select email, version from app.contact_details where subject_id = '${subject.id}'`,
			`select personal from audit.event where record = 'contact_details' and subject_id = '${subject.id}'`
		);
		expect(kept).toEqual({ email: 'ivo@example.org', version: 2 });
		expect(events).toEqual([{ personal: true }, { personal: true }]);
	});
});

describe('leaving the study', () => {
	const leave = (id: string, kind: Parameters<typeof recordExit>[3]['kind'], on = '2026-03-05') =>
		recordExit(scene.coordinator, scene.studyId, id, { kind, happenedOn: on, reason: '' });
	const statuses = async (id: string) => {
		const [rows] = await db.sql(
			`select status, count(*)::int as n from app.visit where subject_id = '${id}' group by status`
		);
		return Object.fromEntries((rows ?? []).map((row) => [row.status, row.n]));
	};

	test('R-56: stopping the treatment leaves the visits; the other ways end those to come', async () => {
		await makeList(db, scene);
		end = useAs(db.appUrl);
		for (const kind of ['stopped visits', 'consent withdrawn', 'died'] as const) {
			const subject = await enrolOne(scene);
			await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
			await leave(subject.id, 'intervention discontinued');
			expect(await statuses(subject.id)).toEqual({ planned: 9 });
			await leave(subject.id, kind, '2026-03-10');
			// The baseline window had passed the day before: it stays to be accounted for.
			expect(await statuses(subject.id)).toEqual({ planned: 1, 'not required': 8 });
		}
	});

	test('lost to follow-up needs a logged attempt, completed needs settled visits', async () => {
		const subject = await enrolOne(scene);
		await expect(leave(subject.id, 'lost to follow-up')).rejects.toMatchObject({ code: 'RULE' });
		await expect(leave(subject.id, 'completed')).rejects.toMatchObject({
			message: expect.stringContaining('Baseline')
		});
		await asOwner(db, (client) =>
			client.query(
				`insert into app.contact_attempt (id, study_id, site_id, subject_id, at, way, outcome, by)
				values (gen_random_uuid(), $1, $2, $3, now(), 'telephone', 'no answer', $4)`,
				[scene.studyId, site(), subject.id, scene.coordinator.personId]
			)
		);
		await leave(subject.id, 'lost to follow-up');
	});

	test('is dated between enrolment and today, and said once', async () => {
		const subject = await enrolOne(scene);
		await expect(leave(subject.id, 'died', '2026-03-01')).rejects.toMatchObject({ code: 'RULE' });
		await expect(leave(subject.id, 'died', '2026-03-11')).rejects.toMatchObject({
			code: 'FUTURE'
		});
		await leave(subject.id, 'stopped visits');
		await expect(leave(subject.id, 'stopped visits')).rejects.toMatchObject({ code: 'CONFLICT' });
		await expect(
			randomiseSubject(scene.coordinator, scene.studyId, subject.id)
		).rejects.toMatchObject({ code: 'LEFT_STUDY' });
	});
});
