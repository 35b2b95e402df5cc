import type { LookChoices } from '$lib/domain/look/choices.server';
import type { LookTimeUnit } from '$lib/domain/look/look.input';
import { changeWords, dfWords, methodWords } from '$lib/domain/look/words';

export interface Option {
	value: string;
	label: string;
}

type Choices = Pick<LookChoices, 'definition' | 'randomised' | 'timeUnits'>;

export const measureOptions = ({ definition }: Choices): Option[] =>
	definition.measures.map(({ key, name }) => ({ value: key, label: name }));

export const timeOptions = ({ definition, timeUnits }: Choices): Option[] =>
	timeUnits.map((unit: LookTimeUnit) => ({
		value: unit,
		label:
			unit === 'as given'
				? `${changeWords[definition.timeUnit]} (time as the file gave it)`
				: changeWords[unit]
	}));

export function groupOptions(
	{ definition, randomised }: Choices,
	allow: { arms: boolean; characteristics: boolean }
): Option[] {
	return [
		{ value: 'none', label: 'everyone together' },
		...(allow.characteristics
			? definition.characteristics
					.filter(({ kind }) => kind === 'choice')
					.map(({ key, name }) => ({ value: `characteristic:${key}`, label: `groups by ${name}` }))
			: []),
		...(allow.arms && randomised ? [{ value: 'arms', label: 'the arms' }] : [])
	];
}

export const covariateOptions = ({ definition }: Choices): Option[] => [
	{ value: 'site', label: 'site' },
	{ value: 'baseline', label: 'value at baseline' },
	...definition.characteristics.map(({ key, name }) => ({
		value: `characteristic:${key}`,
		label: name
	}))
];

export const levelOptions: Option[] = [
	{ value: 'yes', label: 'its own level' },
	{ value: 'no', label: 'no level of its own' }
];
export const methodOptions: Option[] = Object.entries(methodWords).map(([value, label]) => ({
	value,
	label
}));
export const dfOptions: Option[] = Object.entries(dfWords).map(([value, label]) => ({
	value,
	label
}));
