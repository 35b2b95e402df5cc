import { createAmendment } from '../../src/lib/domain/amendment/amendment.commands.server';
import { publishAmendmentInput } from '../../src/lib/domain/amendment/amendment.input';
import type { StudyDefinition } from '../../src/lib/domain/study/definition';
import { publishProtocol } from '../../src/lib/domain/study/study.commands.server';
import type { FreshDatabase } from './database';
import { asOwner } from './people';
import type { Scene } from './scene';

interface Answers {
	approvedOn?: string;
	reconsent?: '' | 'yes' | 'no';
	reconsentBy?: string;
}

/** Drafts an amendment by the command and changes its definition by a statement: how a draft is edited is not at issue. */
export async function draftAmendment(
	db: FreshDatabase,
	scene: Pick<Scene, 'manager' | 'studyId'>,
	edit: (definition: StudyDefinition) => StudyDefinition
): Promise<{ id: string; version: number; number: number }> {
	const { protocolVersionId: id, number } = await createAmendment(scene.manager, scene.studyId, {
		summary: 'A visit is added and a window is moved.'
	});
	const version = await asOwner(db, async (client) => {
		const found = await client.query('select definition from app.protocol_version where id = $1', [
			id
		]);
		const changed = await client.query(
			'update app.protocol_version set definition = $2 where id = $1 returning version',
			[id, JSON.stringify(edit(found.rows[0].definition as StudyDefinition))]
		);
		return changed.rows[0].version as number;
	});
	return { id, version, number };
}

export async function amend(
	db: FreshDatabase,
	scene: Pick<Scene, 'manager' | 'studyId'>,
	edit: (definition: StudyDefinition) => StudyDefinition,
	answers: Answers = {}
) {
	const draft = await draftAmendment(db, scene, edit);
	const published = await publishProtocol(
		scene.manager,
		scene.studyId,
		draft.version,
		publishAmendmentInput.parse({ approvedOn: '2026-03-01', ...answers })
	);
	return { ...draft, ...published };
}

/** Week 6 is added, month 3 gets a wider window, the last visit goes, and a measure is added at month 3. */
export const another = (definition: StudyDefinition): StudyDefinition => {
	const last = [...definition.visits].sort((a, b) => a.order - b.order).at(-1);
	const month3 = definition.visits.find((visit) => visit.key === 'month-3');
	if (!last || !month3) throw new Error('The template is another than this test knows.');
	const { [last.key]: _, ...schedule } = definition.schedule;
	return {
		...definition,
		visits: [
			...definition.visits
				.filter((visit) => visit.key !== last.key)
				.map((visit) => ({
					...visit,
					order: visit.order * 10,
					...(visit.key === 'month-3' ? { after: { amount: 21, unit: 'day' as const } } : {})
				})),
			{
				...month3,
				key: 'week-6',
				name: 'Week 6',
				target: { amount: 6, unit: 'week' },
				before: { amount: 3, unit: 'day' },
				after: { amount: 7, unit: 'day' },
				order: month3.order * 10 - 5
			}
		],
		measures: [
			...definition.measures,
			{
				key: 'waist',
				name: 'Waist',
				showLast: 'after',
				kind: 'number',
				unit: 'cm',
				decimals: 0,
				notDoneReasons: ['Declined']
			}
		],
		schedule: {
			...schedule,
			'month-3': [...(schedule['month-3'] ?? []), 'waist'],
			'week-6': ['weight']
		}
	};
};

/** A further consent form, approved on this day. */
export const withForm =
	(version: string, from = '2026-03-01') =>
	(definition: StudyDefinition): StudyDefinition => ({
		...definition,
		consentVersions: [
			...definition.consentVersions,
			{ version, name: `Form ${version}`, from: from as never }
		]
	});
