import { parseArgs } from 'node:util';
import { analyse, readPlan, StatsError, type AnalysisPlan } from '$lib/stats';
import { BadInput } from './bad-input';
import { csvColumns, type ColumnKind } from './csv-columns';
import { readJsonFile, readText } from './files';
import { resultTable } from './table';

/** What a program prints and ends with. */
export interface Outcome {
	status: 0 | 1 | 2;
	/** For standard output. */
	output: string;
	/** For standard error. */
	complaint: string;
}

const usage = 'it is used as heddle fit --plan plan.json data.csv [--table] [--limits]';

function readArguments(args: string[]) {
	try {
		const { values, positionals } = parseArgs({
			args,
			allowPositionals: true,
			options: {
				plan: { type: 'string' },
				table: { type: 'boolean', default: false },
				limits: { type: 'boolean' }
			}
		});
		if (!values.plan) throw new BadInput(`No plan is named; ${usage}.`);
		const [data, ...others] = positionals;
		if (data === undefined || others.length > 0)
			throw new BadInput(`One file of data must be named; ${usage}.`);
		return { ...values, plan: values.plan, data };
	} catch (error) {
		if (error instanceof BadInput) throw error;
		throw new BadInput(`${(error as Error).message.split('. ')[0]}; ${usage}.`);
	}
}

/** Which columns of the data a plan reads, and how. */
export function columnsOfPlan(plan: AnalysisPlan): Map<string, ColumnKind> {
	const numbers = [plan.outcome, plan.time];
	const labels = [plan.subject];
	if (plan.visit) labels.push(plan.visit);
	if (plan.group) labels.push(plan.group);
	for (const c of plan.mean.covariates) {
		if (c.kind === 'numeric') numbers.push(c.name);
		if (c.kind === 'categorical') labels.push(c.name);
	}
	// A column that is both (a visit number that is also the time) is read as numbers, which serve as labels too.
	return new Map([
		...labels.map((name): [string, ColumnKind] => [name, 'label']),
		...numbers.map((name): [string, ColumnKind] => [name, 'number'])
	]);
}

/**
 * The answer to `heddle fit`: one JSON document, or a table to read.
 * Status 1 for input that cannot be used, 2 when the fit did not converge (its numbers are printed all the same).
 */
export function fitCommand(args: string[], analysis: typeof analyse = analyse): Outcome {
	try {
		const named = readArguments(args);
		const plan = readPlan(readJsonFile(named.plan, 'plan'));
		const columns = csvColumns(readText(named.data, 'file of data'), columnsOfPlan(plan));
		const result = analysis(columns, plan, { componentLimits: named.limits });
		return {
			status: result.converged ? 0 : 2,
			output: named.table ? resultTable(result) : `${JSON.stringify(result, null, '\t')}\n`,
			complaint: result.converged
				? ''
				: 'The fit did not converge: its numbers are printed and must not be relied on.\n'
		};
	} catch (error) {
		if (error instanceof BadInput || error instanceof StatsError)
			return { status: 1, output: '', complaint: `${error.message}\n` };
		throw error;
	}
}
