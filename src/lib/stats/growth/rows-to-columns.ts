import type { Columns } from '../design/columns.js';
import { StatsError } from '../errors.js';
import type { AnalysisPlan } from '../plan.js';
import type { GrowthRow, GrowthSpec } from '../types.js';
import type { SettledOptions } from './options.js';

/** Rows as columns in memory, and the plan that reads them. */
export interface GrowthPlan {
	columns: Columns;
	plan: AnalysisPlan;
	groupLevels: readonly string[] | undefined;
}

/** Errors: `wrong-kind`. */
function numberOf(value: unknown, what: string, at: number): number {
	if (typeof value === 'number') return value;
	throw new StatsError('wrong-kind', `The ${what} of row ${at + 1} is not a number.`, {
		row: at + 1
	});
}

/** Errors: `no-data`, `wrong-kind`, `duplicate-name`. */
export function rowsToColumns(
	rows: readonly GrowthRow[],
	spec: GrowthSpec,
	options: SettledOptions
): GrowthPlan {
	if (rows.length === 0)
		throw new StatsError('no-data', 'There are no rows to analyse.', { rows: 0 });
	const covariates = spec.covariates ?? [];
	const taken = new Set(covariates.map((c) => c.name));
	if (taken.size < covariates.length)
		throw new StatsError('duplicate-name', 'Two covariates have one name; each needs its own.');
	// A covariate keeps its name in sentences and coefficients; ours gives way.
	const own = (name: string) => (taken.has(name) ? `${name} of the row` : name);
	const [outcome, subject, time, group] = ['outcome', 'subject', 'time', 'group'].map(own) as [
		string,
		string,
		string,
		string
	];
	const columns: Record<string, (number | string | null)[]> = {
		[outcome]: rows.map((r, i) => (r.outcome === null ? null : numberOf(r.outcome, 'outcome', i))),
		[subject]: rows.map((r) => r.subject),
		[time]: rows.map((r, i) => numberOf(r.time, 'time', i))
	};
	if (spec.group) columns[group] = rows.map((r) => r.group ?? null);
	for (const c of covariates) columns[c.name] = rows.map((r) => r.covariates?.[c.name] ?? null);
	return {
		columns,
		groupLevels: spec.group?.levels,
		plan: {
			outcome,
			scale: 'identity',
			subject,
			time,
			visit: null,
			group: spec.group ? group : null,
			mean: {
				time: 'linear',
				groupByTime: spec.group ? (spec.groupByTime ?? true) : false,
				commonBaseline: false,
				covariates: covariates.map((c) =>
					c.kind === 'numeric'
						? { name: c.name, kind: c.kind }
						: { name: c.name, kind: c.kind, ...(c.levels ? { levels: [...c.levels] } : {}) }
				)
			},
			subjectEffects: options.randomIntercept ? 'level' : 'none',
			visitEffects: false,
			errors: { structure: 'independent', along: 'time', varianceBy: 'none' },
			method: options.method === 'REML' ? 'reml' : 'ml',
			degreesOfFreedom: options.degreesOfFreedom,
			confidence: options.confidence
		}
	};
}
