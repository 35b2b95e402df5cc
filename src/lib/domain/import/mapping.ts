import { z } from 'zod';
import { unitCodes } from '../../units/units';
import { problem } from '../problems';
import { importLimits, type ImportProblem, type Table } from './table';

const column = z.string().min(1).max(importLimits.cellCharacters);
const name = z
	.string()
	.trim()
	.min(1, 'Give a name.')
	.max(100, 'Use at most 100 characters.')
	.refine((text) => !/\p{Cc}/u.test(text), 'Use one line of plain text.');

/** Which column of a file holds what. */
export const importMapping = z.strictObject({
	subject: column,
	time: z.discriminatedUnion('kind', [
		/** Time as a number is kept as given, in its unit. */
		z.strictObject({
			kind: z.literal('number'),
			column,
			unit: z.enum(['day', 'week', 'month', 'year'])
		}),
		/** Dates become days from the anchor: a date in another column, or each subject's first date. */
		z.strictObject({
			kind: z.literal('date'),
			column,
			anchor: z.discriminatedUnion('kind', [
				z.strictObject({ kind: z.literal('first-date') }),
				z.strictObject({ kind: z.literal('column'), column })
			])
		})
	]),
	visit: column.optional(),
	/** A property of subjects that may be compared, such as sex or cohort; never the allocation. */
	characteristic: z.strictObject({ column, name }).optional(),
	allocation: column.optional(),
	covariates: z
		.array(
			z.strictObject({
				column,
				name,
				kind: z.enum(['number', 'choice']),
				/** False: one value for a subject. True: may differ from row to row. */
				varies: z.boolean().default(false)
			})
		)
		.max(50)
		.default([]),
	measures: z
		.array(
			z.strictObject({
				column,
				name,
				unit: z.enum(unitCodes),
				decimals: z.number().int().min(0).max(12)
			})
		)
		.max(100),
	decimalSign: z.enum(['.', ',']).default('.'),
	/** Words that stand for a missing outcome, beside the empty cell. */
	missing: z.array(z.string().min(1).max(20)).max(10).default([])
});

export type ImportMapping = z.infer<typeof importMapping>;
export type ImportMappingInput = z.input<typeof importMapping>;

/** Column names under which an allocation usually travels; refused as a characteristic or covariate when masked. */
const allocationNames =
	/^(arm|arms|treatment|treatments|treat|trt|trtp|trta|allocation|allocated|alloc|randomi[sz]ed|randomi[sz]ation|assignment|assigned|kit)([ _.-]?(arm|group|code|name|no|number))?$/i;

export const looksLikeAllocation = (header: string): boolean => allocationNames.test(header.trim());

/** What is wrong with a mapping for this file, before any row is read. */
export function checkMapping(
	header: readonly string[],
	mapping: ImportMapping,
	options: { masked: boolean }
): ImportProblem[] {
	const problems: ImportProblem[] = [];
	const add = (at: string | null, reason: ImportProblem['problem']) =>
		problems.push({ row: at === null ? null : 1, column: at, problem: reason });
	const known = new Set(header);
	const used = new Set<string>();
	for (const each of mappedColumns(mapping)) {
		if (!known.has(each)) add(each, problem('COLUMN_UNKNOWN', { column: each }));
		else if (used.has(each)) add(each, problem('COLUMN_TWICE', { column: each }));
		used.add(each);
	}
	const names = new Set<string>();
	for (const { column: at, name: given } of [
		...(mapping.characteristic ? [mapping.characteristic] : []),
		...mapping.covariates,
		...mapping.measures
	]) {
		if (names.has(given.toLowerCase())) add(at, problem('NAME_TWICE', { name: given }));
		names.add(given.toLowerCase());
	}
	if (mapping.measures.length === 0) add(null, problem('MEASURES_MISSING'));
	if (options.masked) {
		if (mapping.allocation !== undefined)
			add(
				mapping.allocation,
				problem('ALLOCATION_IN_MASKED_STUDY', { column: mapping.allocation })
			);
		for (const each of [mapping.characteristic, ...mapping.covariates, ...mapping.measures])
			if (each && (looksLikeAllocation(each.column) || looksLikeAllocation(each.name)))
				add(each.column, problem('LOOKS_LIKE_ALLOCATION', { column: each.column }));
	}
	return problems;
}

function mappedColumns(mapping: ImportMapping): string[] {
	const { time } = mapping;
	return [
		mapping.subject,
		time.column,
		...(time.kind === 'date' && time.anchor.kind === 'column' ? [time.anchor.column] : []),
		...(mapping.visit === undefined ? [] : [mapping.visit]),
		...(mapping.characteristic ? [mapping.characteristic.column] : []),
		...(mapping.allocation === undefined ? [] : [mapping.allocation]),
		...mapping.covariates.map((each) => each.column),
		...mapping.measures.map((each) => each.column)
	];
}

/** What a person is offered to start from; every part of it may be wrong and is shown to be changed. */
export type SuggestedMapping = {
	subject?: string;
	time?: ImportMappingInput['time'];
	visit?: string;
	characteristic?: { column: string; name: string };
	allocation?: string;
	measures: ImportMappingInput['measures'];
	decimalSign: '.' | ',';
	/** Columns nothing was guessed for. */
	rest: string[];
};

const guesses = {
	subject:
		/^(subject|subj|participant|patient|person|child|individual|id)([ _.-]?(id|no|nr|number|code))?$|^(usubjid|subjid)$/i,
	date: /^(visit|measurement|exam|sample)?[ _.-]?date$/i,
	number:
		/^(time|t|age|days?|weeks?|months?|years?|study[ _.-]?day)([ _.-]?(in)?[ _.-]?(d|days|wk|weeks|mo|months|y|years))?$/i,
	visit: /^(visit|visit[ _.-]?(no|number|label|name|num)|wave|occasion|timepoint)$/i,
	characteristic: /^(sex|gender|cohort|group)$/i
};

function timeUnitOf(header: string): 'day' | 'week' | 'month' | 'year' {
	if (/week|\bwk/i.test(header)) return 'week';
	if (/month|\bmo\b/i.test(header)) return 'month';
	if (/year|age|\by\b/i.test(header)) return 'year';
	return 'day';
}

/** Guesses which column holds what from the names and the first rows. */
export function suggestMapping(table: Table): SuggestedMapping {
	const sample = table.rows.slice(0, 200);
	const cellsOf = (at: number) =>
		sample.map((row) => row.cells[at]?.trim() ?? '').filter((cell) => cell !== '');
	const left = new Map(table.header.map((each, at) => [each, at]));
	const take = (pattern: RegExp, fits: (cells: string[]) => boolean = () => true) => {
		for (const [each, at] of left)
			if (pattern.test(each) && fits(cellsOf(at))) {
				left.delete(each);
				return each;
			}
		return undefined;
	};
	const commas =
		table.delimiter !== ',' &&
		sample.some((row) => row.cells.some((cell) => /^-?\d+,\d+$/.test(cell)));
	const decimalSign = commas ? ',' : '.';
	const numeric = (cells: string[]) =>
		cells.length > 0 && cells.every((cell) => readNumber(cell, decimalSign) !== null);
	const dates = (cells: string[]) =>
		cells.length > 0 && cells.every((cell) => /^\d{4}-\d{2}-\d{2}$/.test(cell));

	const subject = take(guesses.subject);
	const allocation = take(allocationNames);
	const dateColumn = take(guesses.date, dates);
	const visit = take(guesses.visit);
	const numberColumn = dateColumn === undefined ? take(guesses.number, numeric) : undefined;
	const characteristic = take(guesses.characteristic);
	const measures: SuggestedMapping['measures'] = [];
	const rest: string[] = [];
	for (const [each, at] of left) {
		const cells = cellsOf(at);
		if (!numeric(cells)) rest.push(each);
		else {
			const decimals = Math.max(
				0,
				...cells.map((cell) => readNumber(cell, decimalSign)?.decimals ?? 0)
			);
			measures.push({
				column: each,
				name: each.slice(0, 100),
				unit: '1',
				decimals: Math.min(12, decimals)
			});
		}
	}
	return {
		subject,
		time: dateColumn
			? { kind: 'date', column: dateColumn, anchor: { kind: 'first-date' } }
			: numberColumn
				? { kind: 'number', column: numberColumn, unit: timeUnitOf(numberColumn) }
				: undefined,
		visit,
		characteristic: characteristic ? { column: characteristic, name: characteristic } : undefined,
		allocation,
		measures,
		decimalSign,
		rest
	};
}

const numberShape = /^[+\-−]?(\d{1,25})?(?:\.(\d*))?(?:[eE]([+-]?\d{1,3}))?$/;

/** A number as programs write them, exponents included; null when it is none. Trailing zeros are no decimals. */
export function readNumber(
	cell: string,
	decimalSign: '.' | ','
): { value: number; decimals: number } | null {
	if (decimalSign === ',' && cell.includes('.')) return null;
	const text = decimalSign === ',' ? cell.replace(',', '.') : cell;
	const match = numberShape.exec(text);
	if (!match) return null;
	const fraction = match[2] ?? '';
	if (match[1] === undefined && fraction === '') return null;
	const value = Number(text.replace('−', '-'));
	const decimals = fraction.replace(/0+$/, '').length - Number(match[3] ?? 0);
	return { value: value === 0 ? 0 : value, decimals: Math.max(0, decimals) };
}
