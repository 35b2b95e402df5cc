import { z } from 'zod';
import { unitCodes } from '../../units/units';
import { importMapping, type ImportMappingInput } from './mapping';
import { importLimits } from './table';

const mostDecimals = 6;

const site = z
	.discriminatedUnion('kind', [
		z.strictObject({
			kind: z.literal('site'),
			code: z.string().regex(/^\d{2}$/, 'Choose a site of this study.')
		}),
		z.strictObject({
			kind: z.literal('column'),
			column: z.string().min(1).max(importLimits.cellCharacters)
		})
	])
	.meta({ description: 'One site for everybody, or a column with codes or names of sites.' });

/** Which column holds what, and at which site the subjects are. */
export const importRequest = importMapping
	.extend({ site })
	.refine((mapping) => mapping.measures.every(({ decimals }) => decimals <= mostDecimals), {
		path: ['measures'],
		message: `A measure has at most ${mostDecimals} decimals.`
	})
	.refine((mapping) => mapping.covariates.every(({ varies }) => !varies), {
		path: ['covariates'],
		message: 'What changes from visit to visit comes in as a measure.'
	});
export type ImportRequest = z.output<typeof importRequest>;

export const uploadBody = z.strictObject({
	fileName: z.string().trim().min(1, 'Name the file.').max(200, 'Use at most 200 characters.'),
	content: z.string()
});

export const roles = [
	'leave out',
	'subject',
	'time',
	'date',
	'anchor date',
	'visit',
	'site',
	'choice',
	'number',
	'measure'
] as const;
export type ColumnRole = (typeof roles)[number];

export const roleWords: Record<ColumnRole, string> = {
	'leave out': 'leave out',
	subject: 'the subject',
	time: 'time, as a number',
	date: 'date of the visit',
	'anchor date': 'date that days are counted from',
	visit: 'label of the visit',
	site: 'the site',
	choice: 'characteristic, in words',
	number: 'characteristic, a number',
	measure: 'measure'
};

const texts = (most: number) => z.array(z.string().max(most)).max(importLimits.columns).default([]);

/** The mapping as its page says it: one line of fields for each column of the file, in the file's order. */
export const mappingForm = z.object({
	version: z.coerce.number().int().min(1),
	role: z.array(z.enum(roles)).max(importLimits.columns).default([]),
	name: texts(100),
	unit: texts(40),
	decimals: texts(2),
	timeUnit: z.enum(['day', 'week', 'month', 'year']).default('day'),
	site: z.string().max(10).default(''),
	decimalSign: z.enum(['.', ',']).default('.'),
	missing: z.string().max(200).default('')
});
export type MappingForm = z.output<typeof mappingForm>;

/** What the form says, as the API would say it; or the sentence for whoever filled it in. */
export function requestFrom(
	columns: readonly string[],
	form: MappingForm
): { ok: true; request: z.input<typeof importRequest> } | { ok: false; why: string } {
	const bad = (why: string) => ({ ok: false as const, why });
	const at = (role: ColumnRole) =>
		columns.flatMap((column, i) => (form.role[i] === role ? [{ column, i }] : []));
	for (const role of ['subject', 'time', 'date', 'anchor date', 'visit', 'site'] as const)
		if (at(role).length > 1) return bad(`Two columns cannot both hold ${roleWords[role]}.`);
	const [subject] = at('subject');
	const [time] = at('time');
	const [date] = at('date');
	const [anchor] = at('anchor date');
	const [visit] = at('visit');
	const [place] = at('site');
	if (!subject) return bad('Say which column holds the subject.');
	if (time && date) return bad('Choose either a number or a date for the time.');
	const placed: ImportMappingInput['time'] | null = time
		? { kind: 'number', column: time.column, unit: form.timeUnit }
		: date
			? {
					kind: 'date',
					column: date.column,
					anchor: anchor ? { kind: 'column', column: anchor.column } : { kind: 'first-date' }
				}
			: null;
	if (!placed) return bad('Say which column holds the time.');
	if (anchor && !date) return bad('Days are counted from a date only where visits have dates.');
	const nameOf = (i: number, column: string) => (form.name[i]?.trim() || column).slice(0, 100);
	const measures = at('measure').map(({ column, i }) => ({
		column,
		name: nameOf(i, column),
		unit: (unitCodes as readonly string[]).includes(form.unit[i] ?? '')
			? (form.unit[i] as (typeof unitCodes)[number])
			: ('1' as const),
		decimals: Number(form.decimals[i] ?? 0) || 0
	}));
	return {
		ok: true,
		request: {
			subject: subject.column,
			time: placed,
			...(visit ? { visit: visit.column } : {}),
			covariates: (['choice', 'number'] as const).flatMap((kind) =>
				at(kind).map(({ column, i }) => ({ column, name: nameOf(i, column), kind }))
			),
			measures,
			decimalSign: form.decimalSign,
			missing: form.missing
				.split(/\s+/)
				.filter((word) => word !== '')
				.slice(0, 10),
			site: place ? { kind: 'column', column: place.column } : { kind: 'site', code: form.site }
		}
	};
}
