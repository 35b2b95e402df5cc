import type { StudyDefinition } from '../study/definition';

type Criterion = StudyDefinition['eligibility'][number];
export type Answers = Readonly<Record<string, 'yes' | 'no'>>;

/** Answers as the screening holds them. */
export const answersOf = (eligibility: unknown): Answers =>
	(eligibility as { answers?: Answers } | null)?.answers ?? {};

/** The protocol version whose criteria these answers are to; null before anything was answered. */
export const answeredVersionOf = (eligibility: unknown): number | null =>
	(eligibility as { protocolVersion?: number } | null)?.protocolVersion ?? null;

/** When these answers were given, in UTC; null before anything was answered. */
export const answeredAtOf = (eligibility: unknown): string | null =>
	(eligibility as { answeredAt?: string } | null)?.answeredAt ?? null;

/** Whether two sets of answers say the same, in whatever order. */
export const sameAnswers = (one: Answers, other: Answers): boolean => {
	const text = (of: Answers) => JSON.stringify(Object.entries(of).sort());
	return text(one) === text(other);
};

/** An inclusion criterion is met by yes, an exclusion criterion by no; null while it is not answered. */
export function isMet(
	criterion: Pick<Criterion, 'key' | 'kind'>,
	answers: Answers
): boolean | null {
	const answer = answers[criterion.key];
	if (answer === undefined) return null;
	return (answer === 'yes') === (criterion.kind === 'inclusion');
}

/** Every criterion of the version in force that is unanswered or unmet: none may remain before somebody is enrolled. */
export function standing(
	definition: Pick<StudyDefinition, 'eligibility'>,
	answers: Answers
): { unanswered: Criterion[]; unmet: Criterion[] } {
	return {
		unanswered: definition.eligibility.filter((each) => isMet(each, answers) === null),
		unmet: definition.eligibility.filter((each) => isMet(each, answers) === false)
	};
}
