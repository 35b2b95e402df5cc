import { shortDateText, type PlainDate } from '../../time/dates';
import type { StudyDefinition } from '../study/definition';

type Form = StudyDefinition['consentVersions'][number];

/** One published protocol version, as the rules about who follows which need it. */
export interface VersionFacts {
	number: number;
	/** Whether people already in the study are asked again before they follow it; never so for the first. */
	reconsent: boolean;
	forms: readonly Form[];
}

/** A form is known by its label and its language. */
export const formKey = (form: { label: string; language: string }): string =>
	`${form.label} ${form.language}`;
const keyOf = (form: Form) => formKey({ label: form.version, language: form.language ?? 'en' });

export const formKeys = (forms: readonly Form[]): string[] => forms.map(keyOf);

/** The consent forms that a version has and the one before it had not. */
export const newForms = (before: readonly Form[], after: readonly Form[]): Form[] => {
	const known = new Set(formKeys(before));
	return after.filter((form) => !known.has(keyOf(form)));
};

/**
 * The forms by which somebody may consent to a version: those that came with the newest version up to it that asks
 * everybody again and brought a form; all of the version's own where there was none.
 */
export function formsInForce(versions: readonly VersionFacts[], number: number): Set<string> {
	const upTo = [...versions]
		.filter((version) => version.number <= number)
		.sort((a, b) => a.number - b.number);
	const own = upTo.at(-1)?.forms ?? [];
	const named = new Set(formKeys(own));
	for (let at = upTo.length - 1; at > 0; at--) {
		const version = upTo[at] as VersionFacts;
		if (!version.reconsent) continue;
		const earlier = new Set(upTo.slice(0, at).flatMap((each) => formKeys(each.forms)));
		if (formKeys(version.forms).every((key) => earlier.has(key))) continue;
		return new Set([...named].filter((key) => !earlier.has(key)));
	}
	return named;
}

/** The newest version after `from`, up to `to`, that asks people again; null when they may just follow. */
export function askedAgainBy(
	versions: readonly Pick<VersionFacts, 'number' | 'reconsent'>[],
	from: number,
	to: number
): number | null {
	const asking = versions
		.filter((version) => version.number > from && version.number <= to && version.reconsent)
		.map((version) => version.number);
	return asking.length === 0 ? null : Math.max(...asking);
}

const sameJson = (one: unknown, other: unknown) => JSON.stringify(one) === JSON.stringify(other);

/** Whether what people go through changes: visits, what is measured, or what is measured when. */
export const changesConduct = (before: StudyDefinition, after: StudyDefinition): boolean =>
	!sameJson(before.visits, after.visits) ||
	!sameJson(before.measures, after.measures) ||
	!sameJson(before.schedule, after.schedule);

export interface AmendmentAnswers {
	/** The day of the ethics committee's approval. */
	approvedOn: string;
	/** '' leaves it to the rule, where the rule has an answer. */
	reconsent: '' | 'yes' | 'no';
	reconsentBy: string;
}

/** How long people have to be asked again, unless another day is given. Common practice: by their next visit, or a month. */
export const reconsentWithinDays = 30;

export type CheckedAmendment =
	| { ok: true; reconsent: boolean }
	| { ok: false; errors: Partial<Record<keyof AmendmentAnswers, string>> };

/**
 * What publishing an amendment needs: the approval's day, and whether people are asked again. A new consent form means
 * yes unless somebody says no; visits or measures that change without a new form leave no answer to guess.
 */
export function checkAmendment(
	before: StudyDefinition,
	after: StudyDefinition,
	answers: AmendmentAnswers,
	days: { today: PlainDate; previousApproval: PlainDate | null }
): CheckedAmendment {
	const errors: Partial<Record<keyof AmendmentAnswers, string>> = {};
	const fresh = newForms(before.consentVersions, after.consentVersions);
	if (answers.approvedOn === '')
		errors.approvedOn =
			'An amendment is used once the ethics committee has approved it: give the day.';
	else if (answers.approvedOn > days.today) errors.approvedOn = 'This day has not come yet.';
	else if (days.previousApproval && answers.approvedOn < days.previousApproval)
		errors.approvedOn = `The version before was approved on ${shortDateText(days.previousApproval)}: an amendment follows it.`;
	const reconsent =
		answers.reconsent === ''
			? fresh.length > 0
				? true
				: changesConduct(before, after)
					? null
					: false
			: answers.reconsent === 'yes';
	if (reconsent === null)
		errors.reconsent =
			'Visits or measures change and there is no new consent form: say whether people are asked again.';
	if (reconsent && answers.reconsentBy !== '' && answers.reconsentBy < days.today)
		errors.reconsentBy = 'This day has passed.';
	if (Object.keys(errors).length > 0) return { ok: false, errors };
	return { ok: true, reconsent: reconsent ?? false };
}

/** What an amendment may not change once people are in the study: the ground their allocation stands on. */
export function groundChanged(before: StudyDefinition, after: StudyDefinition): string | null {
	if (before.code !== after.code)
		return 'The study’s code stays the same from one version to the next.';
	if (before.masked !== after.masked)
		return 'Whether the arms are masked cannot change in an amendment.';
	const arms = (of: StudyDefinition) => of.arms.map(({ key, ratio }) => ({ key, ratio }));
	if (!sameJson(arms(before), arms(after)))
		return 'The arms and their ratio cannot change in an amendment: subjects are allocated by them.';
	const strata = (of: StudyDefinition) =>
		of.strata.map(({ key, levels }) => ({ key, levels: levels.map((level) => level.key) }));
	if (!sameJson(strata(before), strata(after)) || before.stratifyBySite !== after.stratifyBySite)
		return 'The strata cannot change in an amendment: subjects are allocated within them.';
	return null;
}
