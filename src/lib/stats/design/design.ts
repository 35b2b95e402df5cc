import { StatsError } from '../errors.js';
import type { Counts, GrowthRow, GrowthSpec } from '../types.js';
import { levelsOf } from './levels.js';
import {
	entry,
	namesOf,
	termsOf,
	type CodedRow,
	type CovariateLevels,
	type Term
} from './terms.js';
import { screenRows, type UsableRow } from './usable-rows.js';

/** The data as the likelihood sees them. */
export interface Design {
	n: number;
	p: number;
	/** n × p, column-major: the entry of row i and column j is `x[j * n + i]`. */
	x: Float64Array;
	/** Outcome of each row. */
	y: Float64Array;
	time: Float64Array;
	/** Name of each column. */
	names: string[];
	terms: Term[];
	/** Position in `subjects` of the subject of each row. */
	subject: Int32Array;
	/** The caller's labels, in the order of first used row. */
	subjects: string[];
	/** Position in `groups` of each subject's group; all 0 when there is one group. */
	subjectGroup: Int32Array;
	/** Levels in order, the first the reference; empty when there is one group. */
	groups: string[];
	groupByTime: boolean;
	covariates: CovariateLevels[];
	counts: Counts;
}

/** Errors: `group-changes`. */
function indexSubjects(usable: readonly UsableRow[]) {
	const positions = new Map<string, number>();
	const groups: (string | null)[] = [];
	const subject = Int32Array.from(usable, (row) => {
		const known = positions.get(row.subject);
		if (known === undefined) {
			positions.set(row.subject, groups.length);
			groups.push(row.group);
			return groups.length - 1;
		}
		if (groups[known] !== row.group) {
			throw new StatsError(
				'group-changes',
				`Subject “${row.subject}” is in the group “${groups[known]}” and in “${row.group}”; a subject belongs to one group.`,
				{ subject: row.subject }
			);
		}
		return known;
	});
	return { subject, subjects: [...positions.keys()], groups };
}

function rowsPerSubject(subject: Int32Array, subjects: number): number[] {
	const sizes = new Array<number>(subjects).fill(0);
	for (const i of subject) sizes[i]!++;
	return sizes;
}

/** Errors: `constant-outcome`, `too-few-observations`. */
function refuseTheHopeless(usable: readonly UsableRow[], p: number): void {
	const first = usable[0]!.outcome;
	if (usable.every((row) => row.outcome === first)) {
		throw new StatsError(
			'constant-outcome',
			`Every outcome is ${first}; there is no variation to explain.`,
			{ outcome: first }
		);
	}
	if (usable.length <= p) {
		throw new StatsError(
			'too-few-observations',
			`${usable.length} usable rows cannot carry ${p} coefficients and a residual variance; at least ${p + 1} are needed.`,
			{ observations: usable.length, coefficients: p }
		);
	}
}

/**
 * The design matrix of a growth model and everything that came with it.
 *
 * X (n × p) has the columns intercept, time, group (treatment coding, first level the reference),
 * time × group, then the covariates in the order of the plan. Time keeps the unit and origin it is given in.
 * Rank is judged at the fit, where the column that is determined by others is named.
 * Errors: `no-data`, `not-finite`, `wrong-kind`, `unknown-level`, `empty-level`, `single-level`,
 * `duplicate-name`, `group-changes`, `constant-outcome`, `too-few-observations`.
 */
export function buildDesign(rows: readonly GrowthRow[], spec: GrowthSpec): Design {
	const screening = screenRows(rows, spec);
	const { usable } = screening;
	if (usable.length === 0) {
		throw new StatsError(
			'no-data',
			rows.length === 0
				? 'There are no rows to analyse.'
				: `None of the ${rows.length} rows has an outcome and every value the model needs.`,
			{ rows: rows.length }
		);
	}
	const covariates = (spec.covariates ?? []).map((c, i): CovariateLevels => {
		const found = usable.map((row) => String(row.covariates[i]));
		return {
			name: c.name,
			kind: c.kind,
			levels: c.kind === 'numeric' ? [] : levelsOf(found, c.levels, `“${c.name}”`)
		};
	});
	const groups = spec.group
		? levelsOf(
				usable.map((row) => row.group!),
				spec.group.levels,
				'the group'
			)
		: [];
	const groupByTime = groups.length > 0 && (spec.groupByTime ?? true);
	const terms = termsOf(groups, groupByTime, covariates);
	const names = namesOf(terms, groups, covariates);
	const n = usable.length;
	const p = terms.length;
	refuseTheHopeless(usable, p);

	const index = indexSubjects(usable);
	const groupAt = new Map(groups.map((level, i) => [level, i]));
	const levelAt = covariates.map((c) => new Map(c.levels.map((level, i) => [level, i])));
	const coded = usable.map((row): CodedRow => ({
		time: row.time,
		group: row.group === null ? 0 : groupAt.get(row.group)!,
		covariates: row.covariates.map((value, i) =>
			covariates[i]!.kind === 'numeric' ? Number(value) : levelAt[i]!.get(String(value))!
		)
	}));
	const x = new Float64Array(n * p);
	terms.forEach((term, j) => coded.forEach((row, i) => (x[j * n + i] = entry(term, row))));

	const sizes = rowsPerSubject(index.subject, index.subjects.length);
	return {
		n,
		p,
		x,
		y: Float64Array.from(usable, (row) => row.outcome),
		time: Float64Array.from(usable, (row) => row.time),
		names,
		terms,
		subject: index.subject,
		subjects: index.subjects,
		subjectGroup: Int32Array.from(index.groups, (g) => (g === null ? 0 : groupAt.get(g)!)),
		groups,
		groupByTime,
		covariates,
		counts: {
			rows: rows.length,
			observations: n,
			subjects: index.subjects.length,
			droppedSubjects: new Set(rows.map((row) => row.subject)).size - index.subjects.length,
			droppedOutcomes: screening.droppedOutcomes,
			droppedRows: screening.droppedRows,
			missingByVariable: screening.missingByVariable,
			fewestPerSubject: sizes.reduce((a, b) => Math.min(a, b)),
			mostPerSubject: sizes.reduce((a, b) => Math.max(a, b))
		}
	};
}
