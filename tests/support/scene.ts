import {
	askForList,
	makeAllocationList
} from '../../src/lib/domain/randomisation/allocation.commands.server';
import type { ConsentInput } from '../../src/lib/domain/consent/consent.input';
import type { EnrolInput } from '../../src/lib/domain/subject/subject.input';
import {
	addScreening,
	answerEligibility
} from '../../src/lib/domain/subject/screening.commands.server';
import { recordConsent } from '../../src/lib/domain/consent/consent.commands.server';
import { enrolSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { findTemplate } from '../../src/lib/domain/study/templates.server';
import { approveSites } from './approve';
import {
	createStudyFrom,
	definitionFrom,
	publishProtocol
} from '../../src/lib/domain/study/study.commands.server';
import type { StudyDefinition } from '../../src/lib/domain/study/definition';
import type { CreateStudyInput } from '../../src/lib/domain/study/study.input';
import { getProtocol } from '../../src/lib/domain/study/study.reads.server';
import type { Actor } from '../../src/lib/server/actor';
import { actorFor } from '../../src/lib/server/auth/actor';
import { openDatabase, useDatabase } from '../../src/lib/server/db/db';
import { forgetSender } from '../../src/lib/server/jobs/queue';
import { newId } from '../../src/lib/id';
import type { Role } from '../../src/lib/domain/person/roles';
import type { FreshDatabase } from './database';
import { addPerson, addRole } from './people';

/** A published study with people at two sites, made by the application's own commands. */
export interface Scene {
	studyId: string;
	sites: { id: string; code: string }[];
	manager: Actor;
	/** At the first site. */
	coordinator: Actor;
	investigator: Actor;
	nurse: Actor;
	/** At the second site. */
	other: Actor;
	independent: Actor;
	consentVersionId: string;
	/** A further person with a role in the study. */
	person(role: Role, siteId?: string | null): Promise<Actor>;
}

/** Commands speak to this database, as the web server does, until the function that is given back is called. */
export function useAs(url: string): () => Promise<void> {
	const open = openDatabase(url);
	useDatabase(open);
	forgetSender();
	return async () => {
		useDatabase(undefined);
		forgetSender();
		await open.close();
	};
}

let made = 0;

export async function makeScene(
	db: FreshDatabase,
	change: Partial<CreateStudyInput> = {},
	/** Where a study is wanted that no template gives. */
	define: (definition: StudyDefinition) => StudyDefinition = (definition) => definition
): Promise<Scene> {
	const tag = `${++made}`;
	const account = async (name: string) =>
		addPerson(db, {
			email: `${name.toLowerCase()}-${newId()}@example.org`,
			name: `${name} ${tag}`
		});
	const managerId = await account('Mara');
	await addRole(db, managerId, 'data_manager');
	const manager = await actorFor(managerId, 'scene');
	const template = findTemplate('two-arm-trial');
	if (!template) throw new Error('The template two-arm-trial is not there');
	const facts = {
		template: 'two-arm-trial',
		code: `WEFT-${tag}`,
		name: 'Weft',
		masked: true,
		training: false,
		sites: [
			{ name: 'Northmoor', zone: 'Europe/London' },
			{ name: 'Saltreach', zone: 'America/New_York' }
		],
		consentApprovedOn: '2025-01-06',
		...change
	};
	// Most scenes are about something else than the investigator's signature.
	const { studyId } = await createStudyFrom(
		manager,
		define({ ...definitionFrom(template.definition, facts), eligibilitySigned: false }),
		{ training: facts.training }
	);
	const draft = await getProtocol(manager, studyId);
	await publishProtocol(manager, studyId, draft.version);
	await approveSites(manager, studyId);
	const [sites = [], consents = []] = (await db.sql(
		`select id, code from app.site where study_id = '${studyId}' order by code`,
		`select id from app.consent_version where study_id = '${studyId}'`
	)) as [{ id: string; code: string }[], { id: string }[]];
	const person = async (role: Role, siteId: string | null = null) => {
		const id = await account(role);
		await addRole(db, id, role, studyId, siteId);
		return actorFor(id, 'scene');
	};
	const first = sites[0]?.id as string;
	return {
		studyId,
		sites,
		manager,
		coordinator: await person('coordinator', first),
		investigator: await person('investigator', first),
		nurse: await person('nurse', first),
		other: await person('coordinator', sites[1]?.id ?? first),
		independent: await person('independent_statistician'),
		consentVersionId: consents[0]?.id as string,
		person
	};
}

/** Answers that meet every criterion of the study's definition. */
export async function metAnswers(scene: Scene): Promise<Record<string, 'yes' | 'no'>> {
	const { definition } = await getProtocol(scene.manager, scene.studyId);
	return Object.fromEntries(
		definition.eligibility.map((each) => [each.key, each.kind === 'inclusion' ? 'yes' : 'no'])
	);
}

export const particulars: Pick<EnrolInput, 'stratum' | 'characteristics'> = {
	stratum: { 'kidney-function': 'below-45' },
	characteristics: { sex: 'female', 'birth-date': '1961-04-30' }
};

export const consentOn = (scene: Scene, by: Actor, on: string) => ({
	consentVersionId: scene.consentVersionId,
	signedOn: on,
	signedTime: '10:00',
	obtainedOn: on,
	obtainedTime: '10:00',
	relationship: '',
	witnessed: false,
	minor: false,
	assent: '' as const,
	assentReason: '',
	explainedBy: by.personId,
	signedBy: 'participant' as const,
	copyGiven: true
});

/** Screens, takes consent from and enrols somebody at a site, the whole way. */
export async function enrolOne(
	scene: Scene,
	actor: Actor = scene.coordinator,
	siteId = scene.sites[0]?.id as string,
	change: Partial<EnrolInput> & { on?: string; consent?: ConsentInput } = {}
): Promise<{ id: string; number: string }> {
	const { on = '2026-03-02', consent, ...input } = change;
	const screening = await addScreening(actor, scene.studyId, { siteId, screenedOn: on });
	await recordConsent(actor, scene.studyId, screening.id, consent ?? consentOn(scene, actor, on));
	const { version } = await answerEligibility(
		actor,
		scene.studyId,
		screening.id,
		{ answers: await metAnswers(scene) },
		screening.version
	);
	return enrolSubject(
		actor,
		scene.studyId,
		screening.id,
		{ enrolledOn: on, ...particulars, ...input },
		version
	);
}

/** The independent statistician asks for the list, and the look worker makes it under its own role; then `useAs` again. */
export async function makeList(
	db: FreshDatabase,
	scene: Scene,
	bestChance?: number
): Promise<string> {
	const { jobRunId } = await askForList(
		scene.independent,
		scene.studyId,
		bestChance === undefined ? {} : { bestChance }
	);
	const end = useAs(db.unmaskedUrl);
	try {
		await makeAllocationList({
			payload: { studyId: scene.studyId, askedBy: scene.independent.personId, jobRunId },
			lastTry: true
		});
	} finally {
		await end();
	}
	return jobRunId;
}
