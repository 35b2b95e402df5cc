import type { CutContent } from '../cut/content';
import { unitText } from '../../units/units';
import { characteristicIn, type LookSpec, type LookTimeUnit } from './look.input';

/** What a look is about, in words, fixed when it is fitted: names may be reworded later, a look may not. */
export interface LookWords {
	question: string;
	model: string;
	measure: { name: string; unit: string; derived: boolean };
	time: { name: string; unit: string; one: string };
	group: { kind: 'arm' } | { kind: 'characteristic'; label: string } | null;
	covariates: Record<string, { label: string; unit?: string }>;
}

export const methodWords = { REML: 'restricted likelihood', ML: 'full likelihood' } as const;
export const dfWords = {
	'kenward-roger': 'Kenward–Roger',
	satterthwaite: 'Satterthwaite',
	naive: 'none'
} as const;
export const changeWords = {
	day: 'daily',
	week: 'weekly',
	month: 'monthly',
	year: 'yearly'
} as const;

type Unit = Exclude<LookTimeUnit, 'as given'>;
export const unitOfTime = (spec: LookSpec, content: Pick<CutContent, 'timeUnit'>): Unit =>
	spec.timeUnit === 'as given' ? content.timeUnit : spec.timeUnit;

/** 'site', 'site and sex', 'site, sex and value at baseline' */
export function listed(words: readonly string[]): string {
	if (words.length < 2) return words.join('');
	return `${words.slice(0, -1).join(', ')} and ${words.at(-1)}`;
}

const inSentence = (name: string) =>
	/^\p{Lu}\p{Ll}/u.test(name) ? name.charAt(0).toLowerCase() + name.slice(1) : name;

type Known = Pick<CutContent, 'measures' | 'characteristics' | 'timeUnit' | 'anchor'>;

/** What a look asks and how, from the slots of its sentence. */
export function wordsOf(spec: LookSpec, content: Known): LookWords {
	const measure = content.measures.find(({ key }) => key === spec.measure);
	const name = measure?.name ?? spec.measure;
	const unit = measure?.unit ? unitText(measure.unit) : '';
	const labelOf = (key: string) =>
		content.characteristics.find((each) => each.key === key)?.name ?? key;
	const one = unitOfTime(spec, content);
	const compared = characteristicIn(spec.group);
	const between =
		spec.group === 'arms'
			? ' between the arms'
			: compared === null
				? ''
				: ` between groups by ${inSentence(labelOf(compared))}`;
	const question = `${spec.group === 'none' ? 'Estimate' : 'Compare'} the ${changeWords[one]} change in ${name}${between}`;

	const covariates: LookWords['covariates'] = {};
	const adjusting: string[] = [];
	for (const slot of spec.covariates) {
		if (slot === 'site') {
			covariates.site = { label: 'Site' };
			adjusting.push('site');
		} else if (slot === 'baseline') {
			covariates.baseline = { label: 'Value at baseline', ...(unit ? { unit } : {}) };
			adjusting.push('value at baseline (which then is no outcome)');
		} else {
			const key = characteristicIn(slot);
			if (key === null) continue;
			const trait = content.characteristics.find((each) => each.key === key);
			const text = trait?.kind === 'number' ? unitText(trait.unit) : '';
			covariates[key] = { label: labelOf(key), ...(text ? { unit: text } : {}) };
			adjusting.push(inSentence(labelOf(key)));
		}
	}
	const model = [
		question,
		adjusting.length > 0 ? `, adjusting for ${listed(adjusting)}` : '',
		spec.ownLevel === 'yes'
			? ', giving each subject its own level'
			: ', treating all measurements as independent',
		', with leftover errors independent',
		`; fitted by ${methodWords[spec.method]}, small-sample correction ${dfWords[spec.df]}.`
	].join('');
	return {
		question: `${question}.`,
		model,
		measure: { name, unit, derived: measure?.kind === 'derived' },
		time: {
			name: spec.timeUnit === 'as given' ? 'study time' : `time since ${content.anchor}`,
			unit: `${one}s`,
			one
		},
		group:
			spec.group === 'arms'
				? { kind: 'arm' }
				: compared === null
					? null
					: { kind: 'characteristic', label: labelOf(compared) },
		covariates
	};
}
