import pg from 'pg';
import { newId } from '../../src/lib/id';
import type { StudyDefinition } from '../../src/lib/domain/study/definition';
import type { FreshDatabase } from './database';
import { asOwner } from './people';
import { makeScene, type Scene } from './scene';

/** A scene whose study differs from the template in these parts of its definition. */
export const sceneOf = (
	db: FreshDatabase,
	{ plannedSubjects, masked = true, ...change }: Partial<StudyDefinition>
): Promise<Scene> =>
	makeScene(db, { masked, ...(plannedSubjects ? { plannedSubjects } : {}) }, (definition) => ({
		...definition,
		...change
	}));

let made = 0;

/** Bare subjects with a consent, put there by their owner: setting the scene for a race. */
export async function addBareSubjects(
	db: FreshDatabase,
	scene: Scene,
	count: number,
	like: (n: number) => { site: number; stratum?: Record<string, string> }
): Promise<{ id: string; siteAt: number }[]> {
	const subjects = Array.from({ length: count }, (_, n) => {
		const { site, stratum } = like(n);
		return {
			id: newId(),
			siteAt: site,
			stratum: stratum ?? { 'kidney-function': 'from-45' },
			n: ++made
		};
	});
	await asOwner(db, async (client) => {
		const [version] = (
			await client.query(`select id from app.protocol_version where study_id = $1`, [scene.studyId])
		).rows;
		for (const { id, siteAt, stratum, n } of subjects) {
			const site = scene.sites[siteAt] as { id: string; code: string };
			await client.query(
				`insert into app.subject (id, study_id, site_id, protocol_version_id, number, enrolled_on, stratum)
				values ($1, $2, $3, $4, $5, '2026-03-02', $6)`,
				[
					id,
					scene.studyId,
					site.id,
					version.id,
					`bare-${site.code}-${n}`,
					JSON.stringify({ ...stratum, site: site.code })
				]
			);
			const screening = newId();
			await client.query(
				`insert into app.screening (id, study_id, site_id, number, screened_on, outcome, subject_id)
				values ($1, $2, $3, $4, '2026-03-02', 'entered', $5)`,
				[screening, scene.studyId, site.id, 10_000 + n, id]
			);
			await client.query(
				`insert into app.consent (id, study_id, site_id, screening_id, subject_id, consent_version_id, signed_at, signed_by, explained_by, copy_given)
				values ($1, $2, $3, $4, $5, $6, '2026-03-02T10:00:00Z', 'participant', $7, true)`,
				[
					newId(),
					scene.studyId,
					site.id,
					screening,
					id,
					scene.consentVersionId,
					scene.coordinator.personId
				]
			);
		}
	});
	return subjects.map(({ id, siteAt }) => ({ id, siteAt }));
}

/** The list with its seed, as the independent statistician's own program is given it. */
export async function unmaskedList(db: FreshDatabase, scene: Scene): Promise<unknown> {
	const client = new pg.Client({ connectionString: db.unmaskedUrl });
	await client.connect();
	try {
		await client.query('begin');
		await client.query(`select app.enter($1, 'independent_statistician', 'test', '', null)`, [
			scene.independent.personId
		]);
		return (await client.query('select closed.read_list($1) as list', [scene.studyId])).rows[0]
			.list;
	} finally {
		await client.end();
	}
}
