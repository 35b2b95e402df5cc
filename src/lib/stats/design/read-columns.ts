import { StatsError } from '../errors.js';
import type { AnalysisPlan } from '../plan.js';
import {
	labelsOf,
	numbersOf,
	rowCount,
	type Columns,
	type Labels,
	type Numbers
} from './columns.js';

/** What the plan says of a covariate, with its values. */
export type CovariateColumn =
	| { kind: 'numeric'; name: string; numbers: Numbers }
	| { kind: 'categorical'; name: string; labels: Labels; given: string[] | undefined }
	| { kind: 'baseline'; name: 'baseline' };

/** The columns a plan names, read and checked value by value; row i of each is row i handed in. */
export interface PlannedColumns {
	rows: number;
	/** On the analysed scale. */
	outcome: Numbers;
	time: Numbers;
	subject: Labels;
	visit: Labels | null;
	group: Labels | null;
	covariates: CovariateColumn[];
}

/** Natural logarithms. Errors: `not-positive`. */
function logarithms(outcome: Numbers): Numbers {
	const { name, missing } = outcome;
	const values = new Float64Array(outcome.values.length);
	for (let i = 0; i < values.length; i++) {
		if (missing?.[i]) continue;
		const value = outcome.values[i]!;
		if (!(value > 0)) {
			throw new StatsError(
				'not-positive',
				`The value of “${name}” in row ${i + 1} is ${value}; on a log scale every outcome must be above zero.`,
				{ column: name, row: i + 1, value }
			);
		}
		values[i] = Math.log(value);
	}
	return { name, values, missing };
}

/** Errors: `missing-subject`. */
function refuseNamelessRows(subject: Labels): void {
	if (!subject.missing) return;
	const row = subject.missing.indexOf(1) + 1;
	throw new StatsError(
		'missing-subject',
		`Row ${row} has no subject: its “${subject.name}” is missing.`,
		{ column: subject.name, row }
	);
}

/**
 * The columns the plan names, with the outcome on the scale it asks for.
 * Errors: `no-data`, `shape-mismatch`, `unknown-column`, `wrong-kind`, `not-finite`, `not-positive`, `missing-subject`.
 */
export function readColumns(columns: Columns, plan: AnalysisPlan): PlannedColumns {
	const rows = rowCount(columns);
	const raw = numbersOf(columns, plan.outcome, 'outcome');
	const subject = labelsOf(columns, plan.subject, 'subject');
	refuseNamelessRows(subject);
	return {
		rows,
		outcome: plan.scale === 'log' ? logarithms(raw) : raw,
		time: numbersOf(columns, plan.time, 'time'),
		subject,
		visit: plan.visit ? labelsOf(columns, plan.visit, 'visit') : null,
		group: plan.group ? labelsOf(columns, plan.group, 'group') : null,
		covariates: plan.mean.covariates.map((c): CovariateColumn => {
			if (c.kind === 'baseline') return { kind: 'baseline', name: 'baseline' };
			if (c.kind === 'numeric')
				return { kind: 'numeric', name: c.name, numbers: numbersOf(columns, c.name, 'covariate') };
			return {
				kind: 'categorical',
				name: c.name,
				labels: labelsOf(columns, c.name, 'covariate'),
				given: c.levels
			};
		})
	};
}
