import type { FieldErrors } from '$lib/refusal';
import { findPartialDate, type PlainDate } from '$lib/time/dates';
import type { StudyDefinition } from '../study/definition';

type Values = Readonly<Record<string, string | number>>;

/** The levels the subject is allocated within, the site's code among them where sites count as a factor. */
export function stratumOf(
	definition: Pick<StudyDefinition, 'strata' | 'stratifyBySite'>,
	answers: Readonly<Record<string, string>>,
	siteCode: string
): { stratum: Record<string, string>; errors: FieldErrors } {
	const stratum: Record<string, string> = {};
	const errors: FieldErrors = {};
	for (const factor of definition.strata) {
		const level = answers[factor.key];
		if (level !== undefined && factor.levels.some((each) => each.key === level))
			stratum[factor.key] = level;
		else errors[`stratum.${factor.key}`] = 'Choose one of the list.';
	}
	for (const key of Object.keys(answers))
		if (!definition.strata.some((factor) => factor.key === key))
			errors[`stratum.${key}`] = 'This study has no such factor.';
	if (definition.stratifyBySite) stratum.site = siteCode;
	return { stratum, errors };
}

/** What is known of the subject once, checked against the definition; every characteristic must be given. */
export function characteristicsOf(
	definition: Pick<StudyDefinition, 'characteristics'>,
	given: Values,
	today: PlainDate
): { characteristics: Record<string, string | number>; errors: FieldErrors } {
	const characteristics: Record<string, string | number> = {};
	const errors: FieldErrors = {};
	for (const each of definition.characteristics) {
		const path = `characteristics.${each.key}`;
		const value = given[each.key];
		if (value === undefined || value === '') {
			errors[path] = 'This is needed.';
			continue;
		}
		if (each.kind === 'choice') {
			if (each.choices.some((choice) => choice.key === value)) characteristics[each.key] = value;
			else errors[path] = 'Choose one of the list.';
		} else if (each.kind === 'birth-date') {
			const born = typeof value === 'string' ? findPartialDate(value.trim()) : null;
			if (born === null) errors[path] = 'Write the date, or as much as is known: 1961-04-30.';
			else if (born > today.slice(0, born.length)) errors[path] = 'This lies in the future.';
			else characteristics[each.key] = born;
		} else {
			const number = typeof value === 'number' ? value : readNumber(value);
			const scale = 10 ** each.decimals;
			if (number === null || !Number.isFinite(number) || Math.abs(number) >= 1e15)
				errors[path] = 'Enter a number.';
			else if (Math.abs(Math.round(number * scale) / scale - number) > Math.abs(number) * 1e-12)
				errors[path] =
					each.decimals === 0 ? 'Enter a whole number.' : `At most ${each.decimals} decimals.`;
			else characteristics[each.key] = number;
		}
	}
	for (const key of Object.keys(given))
		if (!definition.characteristics.some((each) => each.key === key))
			errors[`characteristics.${key}`] = 'This study has no such characteristic.';
	return { characteristics, errors };
}

const readNumber = (text: string): number | null =>
	/^[+−-]?\d{1,15}([.,]\d{1,10})?$/.test(text.trim())
		? Number(text.trim().replace('−', '-').replace(',', '.'))
		: null;
