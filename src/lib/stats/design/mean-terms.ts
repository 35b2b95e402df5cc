import { StatsError } from '../errors.js';
import { baselineName, byGroupName, groupName, interceptName, levelName } from './names.js';
import type { TimeFunction } from './time-basis.js';

/** A covariate as the mean uses it. `levels` is empty for a number. */
export interface MeanCovariate {
	name: string;
	kind: 'numeric' | 'categorical' | 'baseline';
	levels: string[];
}

/** One column of the mean: which function of time, level or covariate it is; positions count from 0. */
export type MeanTerm =
	| { kind: 'intercept' }
	| { kind: 'time'; index: number }
	| { kind: 'group'; level: number }
	| { kind: 'time-by-group'; index: number; level: number }
	| { kind: 'numeric'; covariate: number }
	| { kind: 'category'; covariate: number; level: number };

/** What the mean is made of. */
export interface MeanParts {
	/** Common to all. */
	time: TimeFunction[];
	/** What a group may add; empty when groups keep a constant distance. */
	timeByGroup: TimeFunction[];
	/** Levels, the first the reference; empty without a group. */
	groups: string[];
	/** Whether groups may differ at time 0 (at the first visit). */
	groupAtStart: boolean;
	covariates: MeanCovariate[];
}

/** The columns in their fixed order: intercept, time, groups, time × groups, covariates. */
export function meanTerms(parts: MeanParts): MeanTerm[] {
	const others = parts.groups.slice(1).map((_, i) => i + 1);
	return [
		{ kind: 'intercept' },
		...parts.time.map((_, index): MeanTerm => ({ kind: 'time', index })),
		...(parts.groupAtStart ? others.map((level): MeanTerm => ({ kind: 'group', level })) : []),
		...others.flatMap((level) =>
			parts.timeByGroup.map((_, index): MeanTerm => ({ kind: 'time-by-group', index, level }))
		),
		...parts.covariates.flatMap((c, covariate): MeanTerm[] =>
			c.kind === 'categorical'
				? c.levels.slice(1).map((_, i) => ({ kind: 'category', covariate, level: i + 1 }))
				: [{ kind: 'numeric', covariate }]
		)
	];
}

function nameOf(term: MeanTerm, parts: MeanParts): string {
	switch (term.kind) {
		case 'intercept':
			return interceptName;
		case 'time':
			return parts.time[term.index]!.name;
		case 'group':
			return groupName(parts.groups[term.level]!);
		case 'time-by-group':
			return byGroupName(parts.timeByGroup[term.index]!.name, parts.groups[term.level]!);
		case 'numeric': {
			const covariate = parts.covariates[term.covariate]!;
			return covariate.kind === 'baseline' ? baselineName : covariate.name;
		}
		case 'category': {
			const covariate = parts.covariates[term.covariate]!;
			return levelName(covariate.name, covariate.levels[term.level]!);
		}
	}
}

/** Name of each column. Errors: `duplicate-name`. */
export function meanNames(terms: readonly MeanTerm[], parts: MeanParts): string[] {
	const names = terms.map((term) => nameOf(term, parts));
	const twice = names.find((name, i) => names.indexOf(name) !== i);
	if (twice !== undefined) {
		throw new StatsError(
			'duplicate-name',
			`Two coefficients of the mean would be called “${twice}”; give the column of the covariate another name.`,
			{ name: twice }
		);
	}
	return names;
}

/** The values of the rows in use, by which columns are filled; each n long. */
export interface TermValues {
	n: number;
	time: Float64Array;
	visit: Int32Array;
	/** Position of the group; all 0 without one. */
	group: Int32Array;
	/** By covariate: its number, or the position of its level. */
	covariates: (Float64Array | Int32Array)[];
}

/** Writes the column of a term, inside form, into `column` (n long, zeros). */
export function fillColumn(
	column: Float64Array,
	term: MeanTerm,
	parts: MeanParts,
	values: TermValues
): void {
	const { n, time, visit, group } = values;
	switch (term.kind) {
		case 'intercept':
			column.fill(1);
			return;
		case 'time': {
			const { at } = parts.time[term.index]!;
			for (let i = 0; i < n; i++) column[i] = at(time[i]!, visit[i]!);
			return;
		}
		case 'group':
			for (let i = 0; i < n; i++) if (group[i] === term.level) column[i] = 1;
			return;
		case 'time-by-group': {
			const { at } = parts.timeByGroup[term.index]!;
			for (let i = 0; i < n; i++) if (group[i] === term.level) column[i] = at(time[i]!, visit[i]!);
			return;
		}
		case 'numeric':
			column.set(values.covariates[term.covariate]!);
			return;
		case 'category': {
			const levels = values.covariates[term.covariate]!;
			for (let i = 0; i < n; i++) if (levels[i] === term.level) column[i] = 1;
		}
	}
}

/** A level's position by its label. Errors: `unknown-level`. */
export function levelPosition(levels: readonly string[], level: string, what: string): number {
	const position = levels.indexOf(level);
	if (position >= 0) return position;
	throw new StatsError(
		'unknown-level',
		levels.length === 0
			? `The model has no ${what}, so “${level}” means nothing to it.`
			: `“${level}” is not among the ${what}s of the model: ${levels.map((l) => `“${l}”`).join(', ')}.`,
		{ level }
	);
}
