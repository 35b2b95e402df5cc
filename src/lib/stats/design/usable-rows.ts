import { StatsError } from '../errors.js';
import type { CovariateSpec, GrowthRow, GrowthSpec } from '../types.js';

/** A row all of whose needed values are there, with the position it was handed in at. */
export interface UsableRow {
	at: number;
	subject: string;
	time: number;
	outcome: number;
	group: string | null;
	/** In the order of the covariates of the plan; a category as text. */
	covariates: (number | string)[];
}

export interface Screening {
	usable: UsableRow[];
	droppedOutcomes: number;
	droppedRows: number;
	missingByVariable: { name: string; rows: number }[];
}

function finite(value: unknown, what: string, at: number): number {
	if (typeof value !== 'number') {
		throw new StatsError('wrong-kind', `The ${what} of row ${at + 1} is not a number.`, {
			row: at + 1
		});
	}
	if (!Number.isFinite(value)) {
		throw new StatsError(
			'not-finite',
			`The ${what} of row ${at + 1} is ${value}; it must be finite.`,
			{
				row: at + 1
			}
		);
	}
	return value;
}

function covariateValue(row: GrowthRow, covariate: CovariateSpec, at: number) {
	const value = row.covariates?.[covariate.name] ?? null;
	if (value === null) return null;
	if (covariate.kind === 'numeric') return finite(value, `covariate “${covariate.name}”`, at);
	// A category coded in numbers stays a category, so 0 and 1 are two names here.
	return typeof value === 'number'
		? String(finite(value, `covariate “${covariate.name}”`, at))
		: value;
}

/**
 * The rows a model can use: a missing outcome drops that occasion, a missing group or covariate drops the row.
 *
 * Both are counted; a row lacking its outcome counts there only. Errors: `not-finite`, `wrong-kind`.
 */
export function screenRows(rows: readonly GrowthRow[], spec: GrowthSpec): Screening {
	const covariates = spec.covariates ?? [];
	const names = [...(spec.group ? ['group'] : []), ...covariates.map((c) => c.name)];
	const missing = names.map((name) => ({ name, rows: 0 }));
	const usable: UsableRow[] = [];
	let droppedOutcomes = 0;
	let droppedRows = 0;
	rows.forEach((row, at) => {
		const time = finite(row.time, 'time', at);
		const outcome = row.outcome === null ? null : finite(row.outcome, 'outcome', at);
		const group = spec.group ? (row.group ?? null) : null;
		const values = covariates.map((covariate) => covariateValue(row, covariate, at));
		if (outcome === null) {
			droppedOutcomes++;
			return;
		}
		const needed: unknown[] = spec.group ? [group, ...values] : values;
		if (needed.includes(null)) {
			droppedRows++;
			needed.forEach((value, i) => {
				if (value === null) missing[i]!.rows++;
			});
			return;
		}
		usable.push({
			at,
			subject: row.subject,
			time,
			outcome,
			group,
			covariates: values as (number | string)[]
		});
	});
	return {
		usable,
		droppedOutcomes,
		droppedRows,
		missingByVariable: missing.filter((m) => m.rows > 0)
	};
}
