import { z } from 'zod';
import { canonical, type Json } from '../cut/canonical';

const key = z
	.string()
	.max(40)
	.regex(/^[a-z][a-z0-9]*(-[a-z0-9]+)*$/, 'Choose from the list.');
/** Plain texts by pattern, not unions: a form reads them as they are. */
const choice = (words: string) =>
	z
		.string()
		.max(60, 'Choose from the list.')
		.regex(
			new RegExp(`^(${words}|characteristic:[a-z][a-z0-9]*(-[a-z0-9]+)*)$`),
			'Choose from the list.'
		);

export const timeUnits = ['as given', 'day', 'week', 'month', 'year'] as const;
export type LookTimeUnit = (typeof timeUnits)[number];

const oneOf = <const T extends readonly [string, ...string[]]>(values: T) =>
	z.enum(values, { error: 'Choose from the list.' });

const slots = {
	measure: key.meta({ description: 'Key of a measure with numbers.' }),
	timeUnit: oneOf(timeUnits).meta({
		description:
			'“as given” where the time came as a number from a file; else the unit of actual days.'
	}),
	group: choice('none|arms').meta({ description: 'none, arms, or characteristic:<key>' }),
	covariates: z
		.array(choice('|site|baseline'))
		.max(12, 'Use at most 12.')
		.default([])
		.meta({ description: 'site, baseline, characteristic:<key>' }),
	ownLevel: oneOf(['yes', 'no']).default('yes').meta({
		description: 'Whether each subject has a lasting level of its own.'
	}),
	method: oneOf(['REML', 'ML']).default('REML'),
	df: oneOf(['kenward-roger', 'satterthwaite', 'naive']).default('kenward-roger')
};

/** The slots of the sentence: the model, apart from the cut it is fitted to. */
export const lookSpec = z.strictObject(slots);
export type LookSpec = z.output<typeof lookSpec>;

export const lookInput = z.strictObject({
	cutId: z.uuid('Choose a data cut.'),
	...slots
});
export type LookInput = z.output<typeof lookInput>;

/** The same model in one form: covariates once each, in a fixed order, without empty slots. */
export function settledSpec(spec: LookSpec): LookSpec {
	const covariates = [...new Set(spec.covariates)].filter((each) => each !== '').sort();
	return { ...spec, covariates };
}

export const sameModel = (a: LookSpec, b: LookSpec): boolean =>
	canonical(settledSpec(a) as unknown as Json) === canonical(settledSpec(b) as unknown as Json);

/** The characteristic that a slot names, or null. */
export const characteristicIn = (slot: string): string | null =>
	slot.startsWith('characteristic:') ? slot.slice('characteristic:'.length) : null;
