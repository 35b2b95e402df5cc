import { StatsError } from '../errors.js';

/** One column of X. `covariate` is a position in the plan's list, `level` one in the list of levels. */
export type Term =
	| { kind: 'intercept' }
	| { kind: 'time' }
	| { kind: 'group'; level: number }
	| { kind: 'time-by-group'; level: number }
	| { kind: 'numeric'; covariate: number }
	| { kind: 'category'; covariate: number; level: number };

export interface CovariateLevels {
	name: string;
	kind: 'numeric' | 'categorical';
	/** Empty for a number. */
	levels: string[];
}

/** What a column is worth for one row: the group as a position (0 without one), categories likewise. */
export interface CodedRow {
	time: number;
	group: number;
	covariates: readonly number[];
}

/**
 * The columns of the mean in their fixed order: intercept, time, groups, time × groups, covariates.
 *
 * Treatment coding: a level's column is 1 for its rows, 0 otherwise; the first level has none.
 */
export function termsOf(
	groups: readonly string[],
	groupByTime: boolean,
	covariates: readonly CovariateLevels[]
): Term[] {
	const others = groups.slice(1).map((_, i) => i + 1);
	return [
		{ kind: 'intercept' },
		{ kind: 'time' },
		...others.map((level): Term => ({ kind: 'group', level })),
		...(groupByTime ? others.map((level): Term => ({ kind: 'time-by-group', level })) : []),
		...covariates.flatMap((c, covariate): Term[] =>
			c.kind === 'numeric'
				? [{ kind: 'numeric', covariate }]
				: c.levels.slice(1).map((_, i) => ({ kind: 'category', covariate, level: i + 1 }))
		)
	];
}

/** `intercept`, `time`, `group[girl]`, `time:group[girl]`, `bmi`, `site[Saltreach]`. */
export function nameOf(
	term: Term,
	groups: readonly string[],
	covariates: readonly CovariateLevels[]
): string {
	switch (term.kind) {
		case 'intercept':
		case 'time':
			return term.kind;
		case 'group':
			return `group[${groups[term.level]}]`;
		case 'time-by-group':
			return `time:group[${groups[term.level]}]`;
		case 'numeric':
			return covariates[term.covariate]!.name;
		case 'category':
			return `${covariates[term.covariate]!.name}[${covariates[term.covariate]!.levels[term.level]}]`;
	}
}

/** Errors: `duplicate-name`. */
export function namesOf(
	terms: readonly Term[],
	groups: readonly string[],
	covariates: readonly CovariateLevels[]
): string[] {
	const names = terms.map((term) => nameOf(term, groups, covariates));
	const twice = names.find((name, i) => names.indexOf(name) !== i);
	if (twice !== undefined) {
		throw new StatsError(
			'duplicate-name',
			`Two columns of the mean would be called “${twice}”; rename the covariate.`,
			{ name: twice }
		);
	}
	return names;
}

/** The entry of X in the column of `term`, for one row. */
export function entry(term: Term, row: CodedRow): number {
	switch (term.kind) {
		case 'intercept':
			return 1;
		case 'time':
			return row.time;
		case 'group':
			return row.group === term.level ? 1 : 0;
		case 'time-by-group':
			return row.group === term.level ? row.time : 0;
		case 'numeric':
			return row.covariates[term.covariate]!;
		case 'category':
			return row.covariates[term.covariate] === term.level ? 1 : 0;
	}
}
