import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { bigDefinition } from '../../src/lib/domain/study/big.example';
import { definitionText, normalised } from '../../src/lib/domain/study/definition-file';
import { editDraft } from '../../src/lib/domain/study/draft.commands.server';
import { findNews, getDraft } from '../../src/lib/domain/study/draft.reads.server';
import type { Edit } from '../../src/lib/domain/study/edits.input';
import {
	createBlankStudy,
	createStudyFrom,
	createStudyFromFile,
	publishProtocol
} from '../../src/lib/domain/study/study.commands.server';
import { studyTemplates } from '../../src/lib/domain/study/templates.server';
import { actorFor } from '../../src/lib/server/auth/actor';
import type { Actor } from '../../src/lib/server/actor';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { addPerson, addRole } from '../support/people';
import { useAs } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
let mara: Actor;
let odo: Actor;
let monitor: Actor;
let studyId: string;
let made = 0;

async function person(name: string, role: 'data_manager' | 'monitor', study: string | null) {
	const id = await addPerson(db, { email: `${name.toLowerCase()}-${++made}@example.org`, name });
	await addRole(db, id, role, study);
	return actorFor(id, 'test');
}

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	mara = await person('Mara Quist', 'data_manager', null);
	({ studyId } = await createBlankStudy(mara, { code: 'WARP-1', name: 'Warp', training: false }));
	odo = await person('Odo Vent', 'data_manager', studyId);
	monitor = await person('Una Brook', 'monitor', studyId);
});
afterAll(async () => {
	await end?.();
	await db?.drop();
});

const version = async () => (await getDraft(mara, studyId)).version;
const edit = async (actor: Actor, ...edits: Edit[]) =>
	editDraft(actor, studyId, { edits }, await version());
const named = (key: string, name: string): Edit => ({
	edit: 'change',
	list: 'visits',
	key,
	set: { name }
});
const site = (code: string, name: string): Edit => ({
	edit: 'add',
	list: 'sites',
	item: {
		code,
		name,
		zone: 'Europe/London',
		openingHours: [{ weekday: 1, opens: '08:00', closes: '16:00' }],
		rooms: [{ key: 'blue', name: 'Blue room' }]
	}
});

describe('a draft that two people edit', () => {
	test('a late edit is refused with who changed what meanwhile, and nothing of either is lost', async () => {
		const before = await version();
		await editDraft(mara, studyId, { edits: [named('baseline', 'First visit')] }, before);
		await expect(
			editDraft(odo, studyId, { edits: [{ edit: 'facts', set: { name: 'Weft' } }] }, before)
		).rejects.toMatchObject({
			code: 'DRAFT_CHANGED',
			status: 412,
			message: expect.stringContaining(
				'Mara Quist changed this draft meanwhile: Visit “Baseline”: name from “Baseline” to “First visit”.'
			)
		});
		const draft = await getDraft(odo, studyId);
		expect(draft.definition).toMatchObject({ name: 'Warp', visits: [{ name: 'First visit' }] });
		await editDraft(
			odo,
			studyId,
			{ edits: [{ edit: 'facts', set: { name: 'Weft' } }] },
			draft.version
		);
		expect((await getDraft(mara, studyId)).definition).toMatchObject({
			name: 'Weft',
			visits: [{ name: 'First visit' }]
		});
	});

	test('an open screen learns what others changed since its version, in their order', async () => {
		const since = await version();
		expect(await findNews(odo, studyId, since)).toMatchObject({ definition: null, changes: [] });
		await edit(mara, { edit: 'facts', set: { plannedSubjects: 60 } });
		await edit(odo, { edit: 'facts', set: { timeUnit: 'year' } });
		const news = await findNews(odo, studyId, since);
		expect(news.version).toBe(since + 2);
		expect(news.definition).toMatchObject({ plannedSubjects: 60, timeUnit: 'year' });
		expect(news.changes.map(({ who, own, says }) => ({ who, own, says }))).toEqual([
			{ who: 'Mara Quist', own: false, says: ['Planned subjects from nothing to 60.'] },
			{
				who: 'Odo Vent',
				own: true,
				says: ['Unit of time in the analysis from “month” to “year”.']
			}
		]);
	});

	test('of many at the same instant on the same version one is kept, and the others learn of it', async () => {
		const start = await version();
		const tries = await Promise.allSettled(
			Array.from({ length: 12 }, (_, n) =>
				editDraft(
					n % 2 ? mara : odo,
					studyId,
					{ edits: [{ edit: 'facts', set: { plannedSubjects: 100 + n } }] },
					start
				)
			)
		);
		const kept = tries.flatMap((each, n) => (each.status === 'fulfilled' ? [n] : []));
		expect(kept).toHaveLength(1);
		for (const each of tries)
			if (each.status === 'rejected') expect(each.reason).toMatchObject({ code: 'DRAFT_CHANGED' });
		const draft = await getDraft(mara, studyId);
		expect(draft.version).toBe(start + 1);
		expect(draft.definition.plannedSubjects).toBe(100 + (kept[0] ?? 0));
	});

	test('everybody who tries again on what is there gets in, and no edit is lost', async () => {
		const keys = Array.from({ length: 8 }, (_, n) => `visit-${n + 1}`);
		const add = async (key: string, actor: Actor) => {
			for (;;) {
				const draft = await getDraft(actor, studyId);
				try {
					await editDraft(
						actor,
						studyId,
						{
							edits: [
								{
									edit: 'add',
									list: 'visits',
									item: {
										key,
										name: key,
										anchor: 'enrolment',
										target: { amount: Number(key.slice(6)), unit: 'month' },
										before: { amount: 3, unit: 'day' },
										after: { amount: 3, unit: 'day' },
										order: 0,
										lengthMinutes: 30
									}
								}
							]
						},
						draft.version
					);
					return;
				} catch (error) {
					expect(error).toMatchObject({ code: 'DRAFT_CHANGED' });
				}
			}
		};
		await Promise.all(keys.map((key, n) => add(key, n % 2 ? mara : odo)));
		const { definition } = await getDraft(mara, studyId);
		expect(definition.visits.map((visit) => visit.key).sort()).toEqual(
			['baseline', ...keys].sort()
		);
		expect(new Set(definition.visits.map((visit) => visit.order)).size).toBe(9);
		// They came in any order: each takes its own place.
		await edit(
			mara,
			...keys.map((key, n): Edit => ({ edit: 'move', list: 'visits', key, to: n + 1 }))
		);
	});
});

describe('an edit of a draft', () => {
	test('is undone by the edits it gives back, and both stand in the audit trail', async () => {
		const before = definitionText((await getDraft(mara, studyId)).definition);
		const { inverse } = await edit(
			mara,
			{ edit: 'rename', list: 'measures', key: 'primary', to: 'height' },
			named('visit-1', 'Month one')
		);
		expect((await getDraft(mara, studyId)).definition.primaryMeasure).toBe('height');
		await edit(mara, ...inverse);
		expect(definitionText((await getDraft(mara, studyId)).definition)).toBe(before);
		const [events] = await db.sql(
			`select count(*)::int as n from audit.event e join app.protocol_version v on v.id::text = e.record_id
				where e.record = 'protocol_version' and e.action = 'change' and v.study_id = '${studyId}'`
		);
		expect(events?.[0]?.n).toBe((await version()) - 1);
	});

	test('that changes nothing is no change', async () => {
		const before = await version();
		expect(await edit(mara, { edit: 'facts', set: { name: 'Weft' } })).toMatchObject({
			version: before,
			inverse: []
		});
	});

	test('that would leave no readable definition is refused beside the item’s fields, whole', async () => {
		const before = await getDraft(mara, studyId);
		await expect(
			edit(
				mara,
				named('visit-1', 'Kept?'),
				{
					edit: 'change',
					list: 'visits',
					key: 'visit-2',
					set: { after: { amount: 2000, unit: 'day' }, lengthMinutes: 1 }
				},
				{ edit: 'add', list: 'arms', item: { key: 'a', name: 'A', ratio: 0 } }
			)
		).rejects.toMatchObject({
			code: 'INVALID',
			fields: {
				'visits.visit-2.after.amount': 'Give a number from 0 to 366.',
				'visits.visit-2.lengthMinutes': 'Give a number from 5 to 1440.',
				'arms.a.ratio': 'Give a number from 1 to 10.'
			}
		});
		expect((await getDraft(mara, studyId)).definition).toEqual(before.definition);
	});

	test('answers with what the check finds, and the place where it is mended', async () => {
		const { findings, inverse } = await edit(mara, {
			edit: 'change',
			list: 'visits',
			key: 'visit-2',
			set: { before: { amount: 40, unit: 'day' } }
		});
		expect(findings).toContainEqual(
			expect.objectContaining({
				weight: 'stops',
				section: 'visits',
				place: 'visits?item=visit-2&field=before',
				say: expect.stringContaining('overlap')
			})
		);
		await edit(mara, ...inverse);
	});

	test('is for those who set the study up', async () => {
		await expect(
			editDraft(monitor, studyId, { edits: [named('visit-1', 'No')] }, await version())
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		await expect(findNews(monitor, studyId, 0)).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
	});
});

describe('until a study is first published its rows follow the draft', () => {
	const rows = async () => {
		const [studies, sites, rooms, consents] = await db.sql(
			`select name, code, masked from app.study where id = '${studyId}'`,
			`select code, name, zone, opening from app.site where study_id = '${studyId}' order by code`,
			`select s.code, r.name from app.room r join app.site s on s.id = r.site_id where r.study_id = '${studyId}' order by 1, 2`,
			`select label, approved_on::text, language from app.consent_version where study_id = '${studyId}' order by 1`
		);
		return { study: studies?.[0], sites, rooms, consents };
	};

	test('sites, rooms and consent versions come, change and go with it', async () => {
		await edit(odo, site('01', 'Northmoor'), site('02', 'Tarnbeck'), {
			edit: 'add',
			list: 'consentVersions',
			item: { version: '1.0', name: 'Consent form', from: '2026-01-05' }
		});
		expect(await rows()).toMatchObject({
			sites: [{ code: '01', name: 'Northmoor', zone: 'Europe/London' }, { code: '02' }],
			rooms: [
				{ code: '01', name: 'Blue room' },
				{ code: '02', name: 'Blue room' }
			],
			consents: [{ label: '1.0', approved_on: '2026-01-05', language: 'en' }]
		});
		await edit(
			odo,
			{
				edit: 'change',
				list: 'sites',
				key: '01',
				set: { name: 'North', rooms: [{ key: 'red', name: 'Red room' }] }
			},
			{ edit: 'remove', list: 'sites', key: '02' },
			{ edit: 'change', list: 'consentVersions', key: '1.0', set: { from: '2026-02-02' } },
			{ edit: 'facts', set: { code: 'WARP-2', name: 'Warp two' } }
		);
		expect(await rows()).toMatchObject({
			study: { code: 'WARP-2', name: 'Warp two' },
			sites: [{ code: '01', name: 'North' }],
			rooms: [{ code: '01', name: 'Red room' }],
			consents: [{ approved_on: '2026-02-02' }]
		});
	});

	test('a site where somebody has a role stays until that is ended, and the draft with it', async () => {
		const [sites] = await db.sql(`select id from app.site where study_id = '${studyId}'`);
		const id = await addPerson(db, { email: 'ivo@example.org', name: 'Ivo Lind' });
		await addRole(db, id, 'coordinator', studyId, sites?.[0]?.id);
		await expect(edit(mara, { edit: 'remove', list: 'sites', key: '01' })).rejects.toMatchObject({
			code: 'SITE_IN_USE',
			status: 409
		});
		expect((await getDraft(mara, studyId)).definition.sites).toHaveLength(1);
	});

	test('a code that another study has is refused', async () => {
		await createBlankStudy(mara, { code: 'TAKEN-1', name: 'Taken', training: false });
		await expect(edit(mara, { edit: 'facts', set: { code: 'TAKEN-1' } })).rejects.toMatchObject({
			code: 'CODE_TAKEN'
		});
	});

	test('set up by hand it is published, and then refuses edits', async () => {
		await edit(
			mara,
			{ edit: 'change', list: 'measures', key: 'primary', set: { hardLow: 0, hardHigh: 9 } },
			{ edit: 'remove', list: 'visits', key: 'visit-1' },
			{
				edit: 'cells',
				cells: [2, 3, 4, 5, 6, 7, 8].map((n) => ({
					visit: `visit-${n}`,
					measure: 'primary',
					on: true
				}))
			},
			...[2, 3, 4, 5, 6, 7, 8].map((n): Edit => ({
				edit: 'move',
				list: 'visits',
				key: `visit-${n}`,
				to: n - 1
			}))
		);
		const draft = await getDraft(mara, studyId);
		await publishProtocol(mara, studyId, draft.version);
		await expect(
			editDraft(mara, studyId, { edits: [named('visit-2', 'No')] }, draft.version + 1)
		).rejects.toMatchObject({ code: 'NOT_DRAFT' });
		expect(await findNews(mara, studyId, draft.version)).toMatchObject({ status: 'published' });
	});
});

describe('a study from a file', () => {
	const counts = async () => {
		const [found] = await db.sql(
			`select (select count(*) from app.study)::int as studies, (select count(*) from app.site)::int as sites,
				(select count(*) from app.protocol_version)::int as versions`
		);
		return found?.[0];
	};
	const file = (value: unknown) =>
		new TextEncoder().encode(typeof value === 'string' ? value : JSON.stringify(value));

	test.each(studyTemplates.map(({ key }) => key))('%s comes back as it went out', async (key) => {
		const template = normalised(studyTemplates.find((each) => each.key === key)!.definition);
		const code = `RT-${++made}`;
		const { studyId: made1 } = await createStudyFrom(
			mara,
			{ ...template, code },
			{ training: false }
		);
		const out = definitionText((await getDraft(mara, made1)).definition);
		const { studyId: made2 } = await createStudyFromFile(mara, file(out), {
			code: `${code}-B`,
			training: true
		});
		const back = (await getDraft(mara, made2)).definition;
		expect(definitionText({ ...back, code })).toBe(out);
	});

	test.each<[string, unknown, string]>([
		['not JSON', '{ "format": ', 'not readable as JSON'],
		['another kind', { format: 'something.else/2' }, 'something.else/2'],
		['a list', [], 'must be'],
		['an unknown field', { ...studyTemplates[0]?.definition, colour: 'red' }, 'colour'],
		[
			'a circle of anchors',
			{
				...bigDefinition(3, 2, 'CIRC-1'),
				visits: bigDefinition(3, 2).visits.map((visit, at) =>
					at === 0 ? visit : { ...visit, anchor: `visit:month-${at === 1 ? 2 : 1}` }
				)
			},
			'from itself'
		],
		['400 measures', bigDefinition(3, 400, 'MANY-1'), 'At most 200'],
		['a huge file', 'x'.repeat(3 * 1024 * 1024), 'larger than 2 MB'],
		['NUL', '{"format":"heddle.study/1","name":"a\\u0000b"}', 'UTF-8 text']
	])('%s is refused, and nothing is made', async (_, value, said) => {
		const before = await counts();
		await expect(createStudyFromFile(mara, file(value), { training: false })).rejects.toMatchObject(
			{
				code: 'DEFINITION_FILE',
				message: expect.stringContaining(said)
			}
		);
		expect(await counts()).toEqual(before);
	});

	test('a definition as large as they come is published whole', async () => {
		const { studyId: big } = await createStudyFrom(mara, bigDefinition(), { training: false });
		await publishProtocol(mara, big, 1);
		const [[found] = []] = await db.sql(
			`select (select count(*) from app.planned_measure where study_id = '${big}')::int as cells,
				(select count(*) from audit.event where study_id = '${big}' and record = 'planned_measure')::int as told`
		);
		expect(found).toEqual({ cells: 9000, told: 9000 });
	});
});
