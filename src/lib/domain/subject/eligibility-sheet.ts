import type { StudyDefinition } from '../study/definition';
import { shortDateText, plainDateOf } from '$lib/time/dates';
import { formVersion, type Sheet } from '../signature/signature';
import { isMet, type Answers } from './eligibility';

export interface ChecklistFacts {
	id: string;
	study: string;
	site: string;
	number: number;
	screenedOn: string;
	/** The version whose criteria were answered. */
	protocolVersion: number;
	/** When the answers were given, in UTC. Answers changed and changed back are other answers than those signed. */
	answeredAt: string | null;
	criteria: StudyDefinition['eligibility'];
	answers: Answers;
}

/** The eligibility checklist as it is signed: whose it is, by which protocol version, each criterion with its answer. */
export const eligibilitySheet = (facts: ChecklistFacts): Sheet => ({
	form: formVersion,
	record: { kind: 'eligibility', id: facts.id },
	title: `Eligibility, screening ${facts.site}/${facts.number}`,
	lines: [
		{ key: 'study', label: 'Study', value: facts.study },
		{ key: 'site', label: 'Site', value: facts.site },
		{ key: 'screened', label: 'Screened on', value: shortDateText(plainDateOf(facts.screenedOn)) },
		{ key: 'protocol', label: 'Protocol version', value: String(facts.protocolVersion) },
		{ key: 'answered', label: 'Answered at', value: answeredText(facts.answeredAt) },
		...facts.criteria.map((criterion) => ({
			key: `criterion ${criterion.key}`,
			label: `${criterion.kind === 'inclusion' ? 'Inclusion' : 'Exclusion'}: ${criterion.text}`,
			value: answered(criterion, facts.answers)
		}))
	]
});

function answered(criterion: StudyDefinition['eligibility'][number], answers: Answers): string {
	const met = isMet(criterion, answers);
	if (met === null) return 'not answered';
	return `${answers[criterion.key]}: ${met ? 'met' : 'not met'}`;
}

/** '2 Mar 2026, 09:30:12.345 UTC': exact, so that answers given again within a minute are told apart. */
function answeredText(at: string | null): string {
	if (at === null) return 'not yet';
	return `${shortDateText(plainDateOf(at.slice(0, 10)))}, ${at.slice(11, 23)} UTC`;
}
