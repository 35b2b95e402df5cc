import { StatsError } from '../errors.js';
import { checkPlan } from '../plan-rules.js';
import type { AnalysisPlan } from '../plan.js';
import type { Counts } from '../types.js';
import type { Columns, Labels } from './columns.js';
import { factorOf, type Factor } from './factor.js';
import { gather, subjectGroups, type Gathered } from './gather.js';
import {
	fillColumn,
	meanNames,
	meanTerms,
	type MeanCovariate,
	type MeanParts,
	type MeanTerm,
	type TermValues
} from './mean-terms.js';
import type { ModelDesign } from './model-design.js';
import { ownScaleOf, type OwnScale } from './own-scale.js';
import { rankOf, type AliasedColumn } from './rank.js';
import { readColumns, type PlannedColumns } from './read-columns.js';
import { refuseRepeats } from './repeats.js';
import { screen, type DroppedRows, type Screening } from './screening.js';
import { timeFunctions } from './time-basis.js';
import { visitOrder } from './visit-order.js';

export interface DesignCounts extends Counts {
	/** Rows that became a baseline value and so are no outcome. */
	baselineRows: number;
}

/** All columns of the mean, those left out too. */
export interface MeanColumns {
	names: string[];
	terms: MeanTerm[];
	/** Positions of the columns that X holds, in order. */
	kept: number[];
	aliased: AliasedColumn[];
	/** Over all columns. */
	ownScale: OwnScale | null;
}

/** What the likelihood sees, and the way back to named answers. */
export interface BuiltDesign {
	/**
	 * Its `names` are those of the coefficients on the data's own scale. With a polynomial of degree 2 or more the columns
	 * of X are centred and scaled: their coefficients become the named ones by `ownScale`.
	 */
	design: ModelDesign;
	/** From coefficients of the columns of X to the named ones; null when they are the same. */
	ownScale: OwnScale | null;
	columns: MeanColumns;
	parts: MeanParts;
	counts: DesignCounts;
	/** What was left out, by reason and variable. */
	dropped: DroppedRows[];
	/** Where the baseline values of a baseline covariate were found; null without one. */
	baseline: { at: string; rows: number } | null;
}

export interface DesignOptions {
	/** Levels of the group in order, the first the reference; those found are sorted when left out. */
	groupLevels?: readonly string[];
}

/** A vector of the rows in use, in their order. */
function pick(values: Float64Array, rows: Int32Array): Float64Array {
	const picked = new Float64Array(rows.length);
	for (let i = 0; i < rows.length; i++) picked[i] = values[rows[i]!]!;
	return picked;
}

function pickPositions(column: Labels, position: Int32Array, rows: Int32Array): Int32Array {
	const picked = new Int32Array(rows.length);
	for (let i = 0; i < rows.length; i++) picked[i] = position[column.codes[rows[i]!]!]!;
	return picked;
}

/** The visits that have a row in use, in order. */
function visitsInUse(data: PlannedColumns, rows: Int32Array): Factor | null {
	const { visit } = data;
	if (!visit) return null;
	const there = new Uint8Array(visit.labels.length);
	for (const row of rows) there[visit.codes[row]!] = 1;
	const levels = visitOrder(visit, data.time).filter((l) => there[visit.labels.indexOf(l)]);
	const at = new Map(levels.map((level, i) => [level, i]));
	return {
		name: visit.name,
		levels,
		position: Int32Array.from(visit.labels, (label) => at.get(label) ?? -1)
	};
}

function groupOfRows(gathered: Gathered, subjectGroup: Int32Array): Int32Array {
	const groups = new Int32Array(gathered.rowOf.length);
	for (let s = 0; s < subjectGroup.length; s++)
		groups.fill(subjectGroup[s]!, gathered.subjectStart[s], gathered.subjectStart[s + 1]);
	return groups;
}

/** The covariates with their levels, and their values for the rows in use. */
function covariatesOf(data: PlannedColumns, screening: Screening, gathered: Gathered) {
	const { rowOf } = gathered;
	const covariates: MeanCovariate[] = [];
	const values: TermValues['covariates'] = [];
	for (const c of data.covariates) {
		if (c.kind === 'categorical') {
			const factor = factorOf(c.labels, screening.use, c.given, `“${c.name}”`);
			covariates.push({ name: c.name, kind: c.kind, levels: factor.levels });
			values.push(pickPositions(c.labels, factor.position, rowOf));
			continue;
		}
		covariates.push({ name: c.name, kind: c.kind, levels: [] });
		if (c.kind === 'numeric') values.push(pick(c.numbers.values, rowOf));
		else {
			const own = screening.baseline!.values;
			values.push(Float64Array.from(rowOf, (row) => own[data.subject.codes[row]!]!));
		}
	}
	return { covariates, values };
}

/** Errors: `too-few-observations`, `constant-outcome`. */
function refuseTheHopeless(y: Float64Array, p: number, plan: AnalysisPlan): void {
	if (y.length <= p) {
		throw new StatsError(
			'too-few-observations',
			`${y.length} usable ${y.length === 1 ? 'row' : 'rows'} cannot carry ${p} ${p === 1 ? 'coefficient' : 'coefficients'} and a variance; at least ${p + 1} are needed.`,
			{ observations: y.length, coefficients: p }
		);
	}
	if (y.every((value) => value === y[0])) {
		const value = plan.scale === 'log' ? Math.exp(y[0]!) : y[0]!;
		throw new StatsError(
			'constant-outcome',
			`Every usable outcome (column “${plan.outcome}”) is ${value}; there is no variation to explain.`,
			{ outcome: value }
		);
	}
}

/** X without its aliased columns; the same array when there are none. */
function keepColumns(x: Float64Array, n: number, p: number, kept: readonly number[]): Float64Array {
	if (kept.length === p) return x;
	const rest = new Float64Array(n * kept.length);
	kept.forEach((j, at) => rest.set(x.subarray(j * n, (j + 1) * n), at * n));
	return rest;
}

function countsOf(data: PlannedColumns, screening: Screening, gathered: Gathered): DesignCounts {
	const subjects = gathered.subjectCodes.length;
	return {
		rows: data.rows,
		observations: screening.used,
		subjects,
		droppedSubjects: data.subject.labels.length - subjects,
		droppedOutcomes: screening.droppedOutcomes,
		droppedRows: screening.droppedRows,
		missingByVariable: screening.dropped
			.filter((d) => d.reason === 'value')
			.map((d) => ({ name: d.variable, rows: d.rows })),
		fewestPerSubject: gathered.fewestPerSubject,
		mostPerSubject: gathered.mostPerSubject,
		baselineRows: screening.baseline?.rows ?? 0
	};
}

/**
 * The design of a planned analysis from columns in memory: rows screened and gathered, X built and its rank known.
 *
 * X (n × p) has the columns intercept, time, group (treatment coding against the first level), time × group, covariates, in
 * that order, less those that earlier ones determine, which are named in `design.aliased`. See `names.ts` for the names.
 * Cost: one pass over the rows per column, and p² / 2 for the rank.
 * Errors: `bad-plan`, `not-identified`, `kenward-roger-needs-reml`, `no-data`, `shape-mismatch`, `unknown-column`,
 * `wrong-kind`, `not-finite`, `not-positive`, `missing-subject`, `repeated-occasion`, `unknown-level`, `empty-level`,
 * `single-level`, `duplicate-name`, `group-changes`, `constant-outcome`, `too-few-observations`.
 */
export function buildModelDesign(
	columns: Columns,
	plan: AnalysisPlan,
	options: DesignOptions = {}
): BuiltDesign {
	checkPlan(plan);
	const data = readColumns(columns, plan);
	const screening = screen(data);
	const gathered = gather(data, screening);
	const group = data.group
		? factorOf(data.group, screening.use, options.groupLevels, 'the group')
		: null;
	const subjectGroup = subjectGroups(data, gathered, group?.position ?? null);
	refuseRepeats(data, gathered, plan);

	const { rowOf } = gathered;
	const n = rowOf.length;
	const visits = visitsInUse(data, rowOf);
	const { covariates, values } = covariatesOf(data, screening, gathered);
	const rows: TermValues = {
		n,
		time: pick(data.time.values, rowOf),
		visit: visits ? pickPositions(data.visit!, visits.position, rowOf) : new Int32Array(n),
		group: groupOfRows(gathered, subjectGroup),
		covariates: values
	};
	const { mean } = plan;
	const labels = visits?.levels ?? [];
	const parts: MeanParts = {
		time: timeFunctions(mean.time, rows.time, labels, false),
		timeByGroup:
			group && mean.groupByTime
				? timeFunctions(mean.time, rows.time, labels, mean.commonBaseline)
				: [],
		groups: group?.levels ?? [],
		groupAtStart: !mean.commonBaseline,
		covariates
	};
	const terms = meanTerms(parts);
	const names = meanNames(terms, parts);
	const x = new Float64Array(n * terms.length);
	terms.forEach((term, j) => fillColumn(x.subarray(j * n, (j + 1) * n), term, parts, rows));
	const { kept, aliased } = rankOf(x, n, terms.length);
	const y = pick(data.outcome.values, rowOf);
	refuseTheHopeless(y, kept.length, plan);

	return {
		design: {
			n,
			p: kept.length,
			x: keepColumns(x, n, terms.length, kept),
			y,
			names: kept.map((j) => names[j]!),
			time: rows.time,
			visit: rows.visit,
			visits: labels,
			subjectStart: gathered.subjectStart,
			subjects: Array.from(gathered.subjectCodes, (code) => data.subject.labels[code]!),
			subjectGroup,
			groups: parts.groups,
			rowOf,
			timeInMean: mean.time,
			aliased: aliased.map(({ column, of }) => ({
				name: names[column]!,
				by: of.map((o) => names[o.column]!)
			}))
		},
		ownScale: ownScaleOf(
			kept.map((j) => terms[j]!),
			parts
		),
		columns: { names, terms, kept, aliased, ownScale: ownScaleOf(terms, parts) },
		parts,
		counts: countsOf(data, screening, gathered),
		dropped: screening.dropped,
		baseline: screening.baseline && { at: screening.baseline.at, rows: screening.baseline.rows }
	};
}
